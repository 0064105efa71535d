"""Frames, pairs and answers in words, for commands and screens alike."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from fieldbook.model.rounding import rounded
from fieldbook.reduce.frames import QUESTION, Answer, FrameInfo, Pair, operation_codes

MOST_CONSIDERED = 6
NAME_LENGTH = 24


def kind_of(info: FrameInfo) -> str:
    """One word for what a frame is."""
    if info.ensemble:
        return "ensemble"
    return "moving" if info.dynamic else "static"


def search_lines(found: Sequence[FrameInfo]) -> Iterator[str]:
    """One line per frame: code, name, kind, area."""
    for info in found:
        area = info.area_name.rstrip(".")
        area = area if len(area) <= 60 else area[:57] + "..."
        yield f"{info.code:11} {info.name:{NAME_LENGTH}} {kind_of(info):9} {area}"


def pair_lines(pair: Pair) -> Iterator[str]:
    """A pair as text: the operation or why there is none, the effect, the grids, what to mind."""
    for word, info in (("receiver", pair.receiver), ("client", pair.client)):
        yield f"{word:9} {info.code} {info.name}, {kind_of(info)}"
    operation = pair.operation
    if pair.refused is not None:
        yield f"refused   {pair.refused.text}"
        yield f"          {pair.refused.remedy}"
    elif operation is not None and not operation.steps:
        yield f"operation {operation.name}"
    elif operation is not None:
        for number, (code, step) in enumerate(zip(operation_codes(operation), operation.steps, strict=True)):
            stated = "by definition" if not step.accuracy_m else f"{step.accuracy_m:g} m stated"
            yield f"{'operation' if not number else '':9} {code}  {step.name}  {stated}"
        yield f"          sum of stated accuracies {operation.accuracy_m:g} m; at epoch {operation.coordinate_epoch:.3f}"
    if pair.effect_mm is not None:
        yield f"effect    {_enu(pair.effect_mm)} mm"
    if pair.change_mm is not None and any(abs(value) >= 0.05 for value in pair.change_mm):
        yield f"a year    {_enu(pair.change_mm)} mm more"
    for grid in operation.grids if operation is not None else ():
        yield f"grid      {grid.name}, installed, SHA-256 {grid.sha256}"
    for name in pair.missing_grids:
        yield f"grid      {name}, not installed: a sound operation needs it"
    others = [item for item in pair.considered if not item.used]
    for item in others[:MOST_CONSIDERED]:
        why = item.reason or (f"lacks {', '.join(item.missing)}" if item.missing else "sound, not the best")
        yield f"not used  {' + '.join(item.codes) or '–'}: {why}"
    if len(others) > MOST_CONSIDERED:
        yield f"          and {len(others) - MOST_CONSIDERED} more"
    for text in pair.warnings:
        yield f"mind      {text}"


def answer_lines(item: Answer, listed: Sequence[FrameInfo], *, place_known: bool) -> Iterator[str]:
    """An answer as text."""
    yield f"{QUESTION} {item.words[:1].upper()}{item.words[1:]}."
    yield item.means
    yield "Ask:"
    for text in item.ask:
        yield f"  - {text}"
    yield "Then write:"
    yield f'  [corrections]  kind = "{item.kind}"'
    for text in item.write:
        yield f"  [frame]        {text}"
    where = "" if place_known or not item.local else ' (those of your place too with --at "LAT LON")'
    yield f"Plausible answers{where}, none of them taken for you:"
    yield from (f"  {text}" for text in search_lines(listed))
    yield f"Beware: {item.beware}"


def _enu(values: tuple[float, float, float]) -> str:
    east, north, up = (rounded(value, 1) for value in values)
    return f"E {_signed(east)}  N {_signed(north)}  U {_signed(up)}"


def _signed(text: str) -> str:
    return text if text.startswith("-") else f"+{text}"
