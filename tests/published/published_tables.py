"""Readers of the published tables in data/, shared by the tests of this folder."""

from __future__ import annotations

import csv
import math
from collections.abc import Iterator
from pathlib import Path

from fieldbook.reduce.geodesy import Helmert, Position

DATA = Path(__file__).parent / "data"


def table(name: str) -> Iterator[dict[str, str]]:
    with (DATA / name).open(encoding="utf-8") as file:
        next(file)
        yield from csv.DictReader(file)


def dms(degrees: float, minutes: float, seconds: float) -> float:
    return math.copysign(abs(degrees) + minutes / 60.0 + seconds / 3600.0, degrees)


def epsg(code: str) -> Helmert:
    """A parameter set of helmert_parameters_epsg.csv (EPSG v11.022): millimetres turned to metres."""
    row = next(row for row in table("helmert_parameters_epsg.csv") if row["code"] == code)

    def three(*names: str, factor: float = 1.0) -> Position:
        x, y, z = (float(row[name] or 0.0) * factor for name in names)
        return x, y, z

    return Helmert(
        translation_m=three("tx", "ty", "tz", factor=1e-3),
        rotation_mas=three("rx", "ry", "rz"),
        scale_ppb=float(row["s"] or 0.0),
        convention="position vector" if row["convention"] == "PV" else "coordinate frame",
        translation_rate_m=three("dtx", "dty", "dtz", factor=1e-3),
        rotation_rate_mas=three("drx", "dry", "drz"),
        scale_rate_ppb=float(row["ds"] or 0.0),
        reference_epoch=float(row["t0"]) if row["t0"] else None,
    )


def alic(case: str) -> list[float]:
    row = next(row for row in table("gda2020_alic.csv") if row["case"] == case)
    return [float(row[axis]) for axis in "XYZ"]
