"""Accuracy classes: the ranges of FGDC-STD-007.2, and classes that the office defines itself.

FGDC-STD-007.2-1998, Geospatial Positioning Accuracy Standards, part 2, table 2.1 (from memory, high): 1, 2, 5 millimetres,
1, 2, 5 centimetres, 1, 2, 5 decimetres, 1, 2, 5, 10 metres; a value is classed by the smallest range that holds its 95 %
figure, horizontal as a radius, vertical as a half-width, network and local accuracy each for itself.

Office classes, best first, in a TOML file:

    [[class]]
    name = "A1"                        # any text
    horizontal_datum_95_m = 0.020      # every line is optional, at least one is needed; what is not stated is not judged
    vertical_datum_95_m = 0.040
    horizontal_between_95_m = 0.015    # to the neighbours, the worst of them
    vertical_between_95_m = 0.030
    occupations = 2
    independence = "independent"       # or "partly independent": the best pair at least
    source = "Office instruction 4, 2027"
"""

from __future__ import annotations

import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from fieldbook.check.repeats import GRADES
from fieldbook.errors import UsageError
from fieldbook.settings.toml_lines import line_of
from fieldbook.settings.values import nearest

RANGES_M = (0.001, 0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0)
NAMES = (
    "1 millimetre", "2 millimetre", "5 millimetre", "1 centimetre", "2 centimetre", "5 centimetre",
    "1 decimetre", "2 decimetre", "5 decimetre", "1 metre", "2 metre", "5 metre", "10 metre",
)  # fmt: skip
BEYOND = "over 10 metre"
LENGTHS = ("horizontal_datum_95_m", "vertical_datum_95_m", "horizontal_between_95_m", "vertical_between_95_m")
MAX_BYTES = 1 << 20


@dataclass(frozen=True)
class Figures:
    """What a mark is classed by. Metres at 95 %, None = not known: a class that asks for it is not met."""

    horizontal_datum_95_m: float | None
    vertical_datum_95_m: float | None
    horizontal_between_95_m: float | None
    vertical_between_95_m: float | None
    occupations: int
    independence: str | None


@dataclass(frozen=True)
class OfficeClass:
    """A class of the office; limits None = not judged."""

    name: str
    horizontal_datum_95_m: float | None = None
    vertical_datum_95_m: float | None = None
    horizontal_between_95_m: float | None = None
    vertical_between_95_m: float | None = None
    occupations: int | None = None
    independence: str | None = None
    source: str | None = None

    def unmet(self, figures: Figures) -> list[str]:
        """The lines a mark misses, one sentence each; empty if it is of this class."""
        found = []
        for key in LENGTHS:
            limit, have = getattr(self, key), getattr(figures, key)
            if limit is not None and (have is None or have > limit):
                said = "not known" if have is None else f"{1000 * have:.1f} mm"
                found.append(f"{key} {said}, at most {1000 * limit:g} mm")
        if self.occupations is not None and figures.occupations < self.occupations:
            found.append(f"occupations {figures.occupations}, at least {self.occupations}")
        if self.independence is not None:
            best = figures.independence
            if best is None or GRADES.index(best) > GRADES.index(self.independence):
                found.append(f"independence {best or 'of one occupation'}, wanted {self.independence}")
        return found


def fgdc_class(value_95_m: float | None) -> str | None:
    """The range that holds a 95 % figure; None for none."""
    if value_95_m is None:
        return None
    return next((name for limit, name in zip(RANGES_M, NAMES, strict=True) if value_95_m <= limit), BEYOND)


def office_class(classes: Sequence[OfficeClass], figures: Figures) -> str | None:
    """The first class whose lines are all met; None if none is."""
    return next((item.name for item in classes if not item.unmet(figures)), None)


def load_classes(path: Path) -> list[OfficeClass]:
    """Classes of a TOML file, best first.

    Raises:
        UsageError: no file, no TOML, or a key or value that is none, with its line.
    """
    if not path.is_file():
        raise UsageError(f"There is no file {path}.", "Name a TOML file with [[class]] tables.", code="missing")
    if path.stat().st_size > MAX_BYTES:
        raise UsageError(f"{path} is larger than 1 MB.", "A list of classes is shorter; is it the right file?")
    try:
        text = path.read_bytes().decode("utf-8")
        tree = tomllib.loads(text)
    except (UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise UsageError(f"{path} is no TOML: {error}.", "Correct it.", code="toml") from None
    tables = tree.get("class")
    if set(tree) != {"class"} or not isinstance(tables, list) or not all(isinstance(item, dict) for item in tables):
        raise UsageError(f"{path} holds something else than [[class]] tables.", "Write [[class]] with name and limits.")
    classes = [_class(item, path, text) for item in tables]
    names = [item.name for item in classes]
    if len(set(names)) < len(names):
        raise UsageError(f"{path} names a class twice.", "Each class needs a name of its own.")
    return classes


def _class(table: dict[str, Any], path: Path, text: str) -> OfficeClass:
    known = ("name", *LENGTHS, "occupations", "independence", "source")
    for key, value in table.items():
        if key not in known:
            place = line_of(text, "class", key)
            raise UsageError(
                f'{path}{"" if place is None else f", line {place}"}: a class has no key "{key}".{nearest(key, known)}',
                f"The keys are {', '.join(known)}.",
            )
        wrong = _wrong(key, value)
        if wrong:
            raise UsageError(f"{path}: class {table.get('name', '?')}: {key} {wrong}.", "Correct it.")
    if "name" not in table or len(table.keys() - {"name", "source"}) == 0:
        raise UsageError(f"{path}: a class needs a name and at least one limit.", "Add them.")
    values: dict[str, Any] = {key: float(value) if key in LENGTHS else value for key, value in table.items()}
    return OfficeClass(**values)


def _wrong(key: str, value: Any) -> str:
    if key in LENGTHS:
        good = isinstance(value, int | float) and not isinstance(value, bool) and 0 < value < 1000
        return "" if good else "needs metres above zero"
    if key == "occupations":
        return "" if isinstance(value, int) and not isinstance(value, bool) and 1 <= value < 1000 else "needs a count"
    if key == "independence":
        return "" if value in GRADES else f"takes one of {', '.join(GRADES)}"
    return "" if isinstance(value, str) and value.strip() else "needs a text"
