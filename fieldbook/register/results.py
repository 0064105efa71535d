"""A register's marks with everything that is said of them: coordinate, both accuracies, classes. One row per mark."""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from fieldbook.reduce.geodesy import geocentric

from .classes import Figures, OfficeClass, fgdc_class, office_class
from .combining import MarkValue, combine_register
from .evidence import finite
from .network import NEIGHBOURS, Local, local_accuracies
from .store import Register

CANDIDATES = 8 * NEIGHBOURS


@dataclass(frozen=True)
class Row:
    """One mark. datum_class, between_class: ranges of FGDC-STD-007.2, horizontal and vertical; office: the office's own."""

    value: MarkValue
    local: Local
    figures: Figures
    datum_class: tuple[str | None, str | None]
    between_class: tuple[str | None, str | None]
    office: str | None


def rows_of(register: Register, classes: Sequence[OfficeClass] = (), only: Sequence[int] | None = None) -> list[Row]:
    """Rows in order of number. Neighbours are sought among all marks, also where only some rows are wanted.

    Raises:
        BookError: evidence is missing or damaged.
    """
    values = combine_register(register, None if only is None else _with_neighbours(register, only))
    locals_ = local_accuracies(values, only)
    return [
        row_of(value, locals_.get(value.mark.number, Local(())), classes)
        for value in values
        if only is None or value.mark.number in only
    ]


def _with_neighbours(register: Register, only: Sequence[int]) -> list[int]:
    """The marks wanted and those around them, by the places that stand in the entries: two thousand need not be combined
    for one. Many more than are stated, because some may have no place in the same frame."""
    placed = {
        number: geocentric(place[0], place[1], place[2] or 0.0)
        for number, mark in register.state().marks().items()
        if (place := next((held.place for held in mark.occupations if held.place is not None), None)) is not None
    }
    numbers, found = list(placed), set(only)
    places = np.array(list(placed.values())).reshape(-1, 3)
    for number in only:
        if number in placed:
            order = np.argsort(np.linalg.norm(places - placed[number], axis=1), kind="stable")
            found.update(numbers[int(place)] for place in order[: CANDIDATES + 1])
    return sorted(found)


def row_of(value: MarkValue, local: Local, classes: Sequence[OfficeClass]) -> Row:
    """Classes of one mark."""
    datum = value.datum
    figures = Figures(
        horizontal_datum_95_m=None if datum is None else datum.horizontal95_m,
        vertical_datum_95_m=None if datum is None else datum.vertical95_m,
        horizontal_between_95_m=local.horizontal_worst_m,
        vertical_between_95_m=local.vertical_worst_m,
        occupations=len(value.members),
        independence=value.independence,
    )
    return Row(
        value,
        local,
        figures,
        (fgdc_class(figures.horizontal_datum_95_m), fgdc_class(figures.vertical_datum_95_m)),
        (fgdc_class(local.horizontal_mean_m), fgdc_class(local.vertical_mean_m)),
        office_class(classes, figures),
    )


def tree_of(row: Row) -> dict[str, Any]:
    """A row as JSON: finite numbers or null."""
    value, local = row.value, row.local
    return {
        "mark": value.mark.number,
        "name": value.mark.name,
        "names": list(value.mark.names),
        "from_utc": value.mark.from_utc,
        "until_utc": value.mark.until_utc,
        "place": None if value.place is None else dataclasses.asdict(value.place),
        "height": None if value.height is None else dataclasses.asdict(value.height),
        "method": value.method,
        "datum": None if value.datum is None else finite(dataclasses.asdict(value.datum)),
        "datum_class": list(row.datum_class),
        "cov_own_m2": value.cov_own_m2,
        "cov_common_m2": value.cov_common_m2,
        "between": {
            "horizontal95_mean_m": local.horizontal_mean_m,
            "horizontal95_worst_m": local.horizontal_worst_m,
            "vertical95_mean_m": local.vertical_mean_m,
            "vertical95_worst_m": local.vertical_worst_m,
            "lines": [dataclasses.asdict(line) for line in local.lines],
        },
        "between_class": list(row.between_class),
        "office_class": row.office,
        "occupations": [dataclasses.asdict(share) for share in value.shares],
        "not_combined": [dataclasses.asdict(item) for item in value.apart],
        "labels": value.labels,
        "repeats": [finite(dataclasses.asdict(item)) for item in value.repeats],
        "odd_one": value.odd_one,
        "independence": value.independence,
        "evidence": value.parties,
        "findings": [dataclasses.asdict(item) for item in value.findings],
    }
