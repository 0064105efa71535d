"""`fieldbook status`: the running recorder and the occupation so far, from the same picture that the screen shows."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.open_book import reading
from fieldbook.commands.output import line, write_json
from fieldbook.commands.words import figures_line, head_line, quality_words

if TYPE_CHECKING:
    from fieldbook.model.live import LiveView
    from fieldbook.model.recorder import RecorderState
    from fieldbook.model.reduction import Reduction
    from fieldbook.model.state import Occupation
    from fieldbook.occupy.live import LiveReader

LOOKS = 100  # a long occupation comes in pieces


@click.command("status", help="The recorder of BOOK and the occupation so far: link, fix, 95 %, leave check, alarms.")
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def command(book: Path, *, as_json: bool) -> None:
    """Read once and tell."""
    reader = live_reader(book)
    try:
        tree = status_tree(book, whole_view(reader))
    finally:
        reader.close()
    if as_json:
        write_json(tree)
        return
    for text in _lines(tree):
        line(text)


def live_reader(book_path: Path) -> LiveReader:
    """A reader of the live picture; close it.

    Raises:
        UsageError: no such file.
        BookError: it is no book.
    """
    with reading(book_path):
        pass
    from fieldbook.occupy.live import LiveReader

    return LiveReader(book_path)


def whole_view(reader: LiveReader) -> LiveView:
    """The picture with all epochs in it: looked at until nothing is left out, or nothing more comes."""
    view, before = reader.snapshot(), -1
    for _ in range(LOOKS):
        if view.reduction is None or view.recorder is None or view.reduction.heard >= view.recorder.epochs:
            break
        if view.reduction.heard == before:
            break  # the recorder states more than there is
        before = view.reduction.heard
        view = reader.snapshot()
    return view


def status_tree(book_path: Path, view: LiveView) -> dict[str, Any]:
    """The JSON of `status`: book, occupation (the open one, else the latest), recorder, figures so far."""
    state = view.state
    return {
        "schema": "fieldbook.status/1",
        "book": {"path": str(book_path), "id": state.id, "head": {"seq": state.head_seq, "hash": state.head_hash}},
        "occupation": None if view.occupation is None else _occupation(view.occupation, view.elapsed_s),
        "recorder": _recorder(view.recorder, view),
        "figures": None if view.reduction is None else _figures(view.reduction, view),
        "problem": None if view.problem is None else dict(zip(("code", "text", "remedy"), view.problem, strict=True)),
    }


def _occupation(occupation: Occupation, elapsed_s: float | None) -> dict[str, Any]:
    return {
        "occupation": occupation.number,
        "mark": occupation.mark,
        "open": occupation.open,
        "ended_by": occupation.ended_by,
        "started_utc": occupation.started_utc,
        "elapsed_s": elapsed_s,
        "observer": occupation.observer,
        "gaps": sum(1 for entry in occupation.gaps if entry.kind == "gap"),
        "remarks": len(occupation.remarks),
        "height_readings": len(occupation.heights),
        "findings": [entry.body["code"] for entry in occupation.findings],
    }


def _recorder(heard: RecorderState | None, view: LiveView) -> dict[str, Any]:
    tree: dict[str, Any] = {"alive": view.recorder_alive}
    if heard is not None:
        tree |= {key: value for key, value in vars(heard).items() if key not in ("sky", "occupation", "mark")}
        tree["quality_words"] = quality_words(heard.quality)
        tree["satellites_in_view"] = len(heard.sky)
        tree["silence_s"] = view.silence_s
        made = heard.backup_utc_ms
        tree["backup_age_s"] = None if made is None else max(0.0, (SystemClock().utc_ms() - made) / 1000)
    return tree


def _figures(reduction: Reduction, view: LiveView) -> dict[str, Any]:
    leave = reduction.leave
    return {
        "kept": reduction.kept,
        "set_aside": reduction.set_aside,
        "horizontal95_m": reduction.uncertainty.horizontal95_m,
        "vertical95_m": reduction.uncertainty.vertical95_m,
        "governed_by": reduction.uncertainty.governed_by,
        "independent_epochs": view.effective_epochs,
        "findings": [{"code": item.code, "severity": item.severity, "text": item.text} for item in reduction.findings],
        "verdict": None if leave is None else leave.verdict,
        "open_lines": []
        if leave is None
        else [
            {"line": item.line, "scope": item.scope, "text": item.text, "time_to_go_s": item.time_to_go_s}
            for item in leave.lines
            if not item.met
        ],
    }


def _lines(tree: dict[str, Any]) -> list[str]:
    occupation, recorder, figures = tree["occupation"], tree["recorder"], tree["figures"]
    if occupation is None:
        return [f"{tree['book']['path']}: no occupation yet"]
    how = "open" if occupation["open"] else f"ended by {occupation['ended_by']}"
    said = [f"{tree['book']['path']}: occupation {occupation['occupation']} of {occupation['mark']}, {how}"]
    said.append(head_line(tree))
    said.append(figures_line(tree))
    said += [f"alarm: {alarm}" for alarm in recorder.get("alarms", [])]
    if figures is not None:
        said += [f"open: {item['line']}: {item['text']}" for item in figures["open_lines"]]
        said += [f"{item['severity']}: {item['text']}" for item in figures["findings"] if item["severity"] != "info"]
    return said
