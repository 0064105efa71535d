"""`fieldbook status`: what the recorder of a book is doing, from its heartbeat row and its lock; no reduction."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.open_book import reading
from fieldbook.commands.output import line, write_json
from fieldbook.commands.words import head_line, quality_words


@click.command("status", help="What the recorder of BOOK is doing: link, last byte, epochs, fix, alarms.")
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def command(book: Path, *, as_json: bool) -> None:
    """Read once and tell."""
    tree = status_tree(book)
    if as_json:
        write_json(tree)
        return
    for text in _lines(tree):
        line(text)


def status_tree(book_path: Path) -> dict[str, Any]:
    """The JSON of `status`: book, occupation (the open one, else the latest), recorder.

    Raises:
        UsageError: no such file.
        BookError: it is no book.
    """
    from fieldbook.occupy.detached import recorder_alive

    alive = recorder_alive(book_path)
    with reading(book_path) as book:
        state, heard = book.state(), book.recorder_state()
    occupation = state.open_occupation or next(reversed(state.occupations.values()), None)
    recorder: dict[str, Any] = {"alive": alive}
    if heard is not None and occupation is not None and heard.occupation == occupation.number:
        recorder |= {key: value for key, value in vars(heard).items() if key not in ("sky", "occupation", "mark")}
        recorder["quality_words"] = quality_words(heard.quality)
        recorder["satellites_in_view"] = len(heard.sky)
        recorder["silence_s"] = (
            None
            if not alive or heard.last_byte_utc_ms is None
            else max(0.0, (SystemClock().utc_ms() - heard.last_byte_utc_ms) / 1000)
        )
    return {
        "schema": "fieldbook.status/1",
        "book": {"path": str(book_path), "id": state.id, "head": {"seq": state.head_seq, "hash": state.head_hash}},
        "occupation": None
        if occupation is None
        else {
            "occupation": occupation.number,
            "mark": occupation.mark,
            "open": occupation.open,
            "ended_by": occupation.ended_by,
            "started_utc": occupation.started_utc,
            "observer": occupation.observer,
            "gaps": sum(1 for entry in occupation.gaps if entry.kind == "gap"),
            "remarks": len(occupation.remarks),
            "height_readings": len(occupation.heights),
            "findings": [entry.body["code"] for entry in occupation.findings],
        },
        "recorder": recorder,
    }


def _lines(tree: dict[str, Any]) -> list[str]:
    occupation, recorder = tree["occupation"], tree["recorder"]
    if occupation is None:
        return [f"{tree['book']['path']}: no occupation yet"]
    how = "open" if occupation["open"] else f"ended by {occupation['ended_by']}"
    said = [f"{tree['book']['path']}: occupation {occupation['occupation']} of {occupation['mark']}, {how}"]
    said.append(head_line(tree))
    said += [f"alarm: {alarm}" for alarm in recorder.get("alarms", [])]
    said += [f"finding: {code}" for code in occupation["findings"]]
    return said
