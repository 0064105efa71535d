"""`fieldbook entry`: write one entry of the book by hand; prints its seq and its hash."""

from __future__ import annotations

import datetime
from collections.abc import Callable
from pathlib import Path
from typing import Any

import click

from fieldbook.commands import assignments
from fieldbook.commands.open_book import chosen_occupation, reading, writing
from fieldbook.commands.output import line, write_json
from fieldbook.commands.signing import chosen, key_option, say_unsigned, signed_tree
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry
from fieldbook.model.state import BookState
from fieldbook.settings.schema import TABLES
from fieldbook.settings.values import nearest
from fieldbook.signing.in_book import sign_head, signed_by
from fieldbook.signing.signer import Signer

SETUP_TABLES = ("setup", "antenna", "receiver", "corrections", "job", "frame", "requirement")
DECISIONS: dict[str, str] = {
    "date": "date",
    "rollover_weeks": "integer",
    "datum": "text",
    "talker": "text",
    "initialisation": "integer",
    "operation": "steps",
    "accuracy_over_limit": "flag",
    "outside_area": "flag",
    "outside_hull": "flag",
    "height_difference": "text",
    "not_met": "line",
    "grid_file": "sha256",
}
# keys of a set-up that change what the decoder makes of the bytes
DECODER_KEYS = frozenset({"receiver.accept_without_checksum", "receiver.talker"})


@click.command(
    "entry",
    help="Write an entry into BOOK and print its number and hash. Keys are those of the session file: "
    "[[setup.height]] for height, any table.key for setup, [mark] for mark; text for remark; for decision one of "
    "date, rollover_weeks, datum, talker, initialisation + used, operation, accuracy_over_limit, outside_area, outside_hull, grid_file, "
    "with reason.",
)
@click.argument("book", type=click.Path(path_type=Path))
@click.argument("kind", type=click.Choice(["remark", "height", "setup", "mark", "end", "decision"]))
@click.option("--occupation", type=int, help="Number; without it the open one, else the only one.")
@click.option("--set", "settings", multiple=True, metavar="KEY=VALUE", help="One key of the entry; repeatable.")
@click.option("--by", "observer", required=True, help="Name of who writes.")
@key_option
@click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")
def command(
    book: Path,
    kind: str,
    occupation: int | None,
    settings: tuple[str, ...],
    observer: str,
    key_path: Path | None,
    *,
    as_json: bool,
) -> None:
    """Check the body, append it, tell its seq and hash."""
    if not observer.strip():
        raise UsageError("An entry needs a name.", "Give --by NAME.")
    choice = chosen(observer, key_path)
    if kind == "end":
        entry = _end(book, occupation, settings, observer, choice.signer)
        choice.say()
    else:
        with writing(book) as opened:
            body = _BODIES[kind](opened.state(), occupation, settings)
            with signed_by(opened, choice.signer):
                entry = opened.append(kind, body, observer)
            say_unsigned(opened, observer, choice)
    if _changes_decoding(entry):
        _decode_again(book, entry.body["occupation"])
    if as_json:
        tree = {"seq": entry.seq, "hash": entry.hash, "utc": entry.utc, "kind": entry.kind, "body": entry.body}
        write_json({"schema": "fieldbook.entry/1", **tree, "signed": signed_tree(choice.signer)})
    else:
        line(f"{entry.seq} {entry.hash}")


def _remark(state: BookState, number: int | None, settings: tuple[str, ...]) -> Tree:
    keys = _only(settings, ("text",), "remark")
    if not keys.get("text", "").strip():
        raise UsageError("A remark needs a text.", 'Add --set text="...".')
    chosen: int | None
    if number is not None:
        chosen = chosen_occupation(state, number).number
    else:
        chosen = state.open_occupation.number if state.open_occupation else None
    return {"occupation": chosen, "text": keys["text"]}


def _height(state: BookState, number: int | None, settings: tuple[str, ...]) -> Tree:
    from fieldbook.settings.session import session_from_tree

    occupation = chosen_occupation(state, number)
    reading_tree = assignments.in_table("setup.height", settings)
    assignments.require("setup.height", reading_tree)
    tree = dict(occupation.session.tree)
    session_from_tree({**tree, "setup": {**tree["setup"], "height": [reading_tree]}})  # slant needs its antenna keys
    return {"occupation": occupation.number, **reading_tree}


def _setup(state: BookState, number: int | None, settings: tuple[str, ...]) -> Tree:
    from fieldbook.settings.session import merged, session_from_tree

    occupation = chosen_occupation(state, number)
    tree, changes = occupation.session.tree, Tree()
    for dotted, text in assignments.pairs(settings):
        table, key = _table_of(dotted)
        here = changes.setdefault(table, {})
        first = key.partition(".")[0]
        if first not in here and isinstance(tree.get(table, {}).get(first), dict):
            here[first] = tree[table][first]  # a part of an inline table changes, the other parts stay
        assignments.put(here, table, key, text)
    if not changes:
        raise UsageError("The set-up entry changes nothing.", "Add --set table.key=value.")
    after = session_from_tree(_with_named_antenna(merged(tree, changes), changes)).tree
    kept: Tree = {table: {key: after[table][key] for key in keys} for table, keys in changes.items()}
    if "antenna" in kept:  # a named file or list brings keys that were not typed
        before = tree.get("antenna", {})
        kept["antenna"] |= {key: value for key, value in after["antenna"].items() if before.get(key) != value}
    return {"occupation": occupation.number, **kept}


def _with_named_antenna(tree: Tree, changes: Tree) -> Tree:
    """The calibration of an ANTEX file or a listed antenna that this entry names, frozen; files from the current folder."""
    if not {"antex", "antex_entry", "listed"} & changes.get("antenna", {}).keys():
        return tree
    from fieldbook.settings.antenna_source import with_antenna

    bare = {key: value for key, value in tree["antenna"].items() if key != "calibration"}
    return with_antenna({**tree, "antenna": bare}, Path.cwd())


def _table_of(dotted: str) -> tuple[str, str]:
    table, dot, key = dotted.partition(".")
    if not dot:
        table, key = "setup", dotted
    if table not in SETUP_TABLES:
        known = [f"{name}.{key}" for name in SETUP_TABLES for key in TABLES[name]]
        raise UsageError(
            f'"{dotted}" is no key of a set-up.{nearest(dotted, known)}',
            f"Write table.key with one of the tables {', '.join(SETUP_TABLES)}.",
        )
    if (table, key) == ("setup", "height"):
        raise UsageError("A height reading is an entry of its own.", "Use `fieldbook entry BOOK height`.")
    return table, key


def _mark(state: BookState, number: int | None, settings: tuple[str, ...]) -> Tree:
    if number is not None:
        raise UsageError("A mark belongs to the book, not to an occupation.", "Leave --occupation out.")
    name = assignments.in_table("mark", settings).get("name")
    if not name:
        raise UsageError("A mark needs its name.", "Add --set name=...")
    tree = assignments.in_table("mark", settings, state.marks.get(name))
    assignments.complete("mark", tree)
    return tree


def _decision(state: BookState, number: int | None, settings: tuple[str, ...]) -> Tree:
    occupation = chosen_occupation(state, number)
    typed = _only(settings, (*DECISIONS, "used", "reason"), "decision")
    named = [key for key in typed if key in DECISIONS]
    if len(named) != 1:
        raise UsageError(
            f"A decision decides one thing, not {len(named)}.", f"Give exactly one of {', '.join(DECISIONS)}."
        )
    if not typed.get("reason", "").strip():
        raise UsageError("A decision needs its reason; it is printed on the certificate.", "Add --set reason=...")
    if ("used" in typed) != (named[0] == "initialisation"):
        raise UsageError("'used' goes with 'initialisation' and with nothing else.", "Set used=true or used=false.")
    body: Tree = {"occupation": occupation.number, "reason": typed["reason"]}
    body[named[0]] = _decided(named[0], typed[named[0]])
    if "used" in typed:
        body["used"] = _decided("used", typed["used"])
    return body


def _decided(key: str, text: str) -> Any:
    from fieldbook.settings.values import value_from_text

    kind = DECISIONS.get(key, "flag")
    if kind == "date":
        try:
            return datetime.date.fromisoformat(text).isoformat()
        except ValueError:
            raise UsageError(f"date needs a day such as 2027-03-04, not {text}.", "Correct the value.") from None
    if kind == "steps":
        steps = [step.strip() for step in text.split(",") if step.strip()]
        if not steps:
            raise UsageError("operation needs at least one step.", "Write for example EPSG:9991 inverse,EPSG:8049.")
        return steps
    if kind == "line":
        from fieldbook.settings.schema import LEAVE_KEYS

        if text not in LEAVE_KEYS:
            raise UsageError(
                f'not_met names a line of the leave check, and "{text}" is none.{nearest(text, LEAVE_KEYS)}',
                f"It is one of {', '.join(LEAVE_KEYS)}.",
            )
        return text
    if kind == "sha256":
        if len(text) != 64 or not set(text.lower()) <= set("0123456789abcdef"):
            raise UsageError(
                f"grid_file needs the SHA-256 of the file, 64 hex digits, not {text[:70]}.",
                "`fieldbook geoid show NAME` tells it.",
            )
        return text.lower()
    if key == "rollover_weeks":
        digits = text.removeprefix("-")
        if not (digits.isascii() and digits.isdigit()) or int(digits) == 0:
            raise UsageError(f"rollover_weeks needs a whole number other than 0, not {text}.", "Usually 1024.")
        return int(text)
    return value_from_text(kind, text, key)


def _only(settings: tuple[str, ...], known: tuple[str, ...], kind: str) -> dict[str, str]:
    typed = dict(assignments.pairs(settings))
    for key in typed:
        if key not in known:
            raise UsageError(
                f'There is no key "{key}" in a {kind}.{nearest(key, known)}', f"It takes {', '.join(known)}."
            )
    return typed


_BODIES: dict[str, Callable[[BookState, int | None, tuple[str, ...]], Tree]] = {
    "remark": _remark,
    "height": _height,
    "setup": _setup,
    "mark": _mark,
    "decision": _decision,
}


def _end(book_path: Path, number: int | None, settings: tuple[str, ...], observer: str, signer: Signer | None) -> Entry:
    from fieldbook.occupy.ending import request_end

    if settings:
        raise UsageError("`end` takes no keys.", "Leave --set out.")
    with reading(book_path) as book:
        state = book.state()
        if number is None and state.open_occupation is None:
            raise UsageError(f"No occupation of {book_path} is open.", "Nothing is left to end.", code="none_open")
        chosen = chosen_occupation(state, number).number
    request_end(book_path, chosen, observer)
    if signer is not None:
        with writing(book_path) as book:
            sign_head(book, signer)
    with reading(book_path) as book:
        ends = [entry for entry in book.entries() if entry.kind == "end" and entry.body["occupation"] == chosen]
    return ends[-1]


def _changes_decoding(entry: Entry) -> bool:
    if entry.kind == "decision":
        return "talker" in entry.body
    if entry.kind == "setup":
        return any(key.partition(".")[2] in entry.body.get("receiver", {}) for key in DECODER_KEYS)
    return False


def _decode_again(book_path: Path, occupation: int) -> None:
    """Put the epochs right, unless a recorder runs: it sees the entry itself."""
    from fieldbook.book.lock import RecorderLock, held
    from fieldbook.occupy.rebuild import decode_again

    if held(book_path):
        return
    with RecorderLock(book_path), writing(book_path) as book:
        decode_again(book, occupation)
