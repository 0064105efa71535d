"""Epochs that passed the gates, as rows of one integer table: what flows through the later stages of screening."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fieldbook.reduce.columns import EpochColumns
from fieldbook.reduce.local_frame import LocalFrame

Ints = NDArray[np.int64]

COLUMNS = (
    "row",  # place in the order of hearing
    "instant_ms",
    "initialisation",
    "east",  # 1e-8 m about the frame's origin
    "north",
    "up",
    "latitude_e8min",
    "longitude_e8min",
    "altitude_e5m",
    "latitude_decimals",
    "longitude_decimals",
    "altitude_decimals",
    "separation_e5m",
    "separation_decimals",
    "quality",
    "sigma_horizontal_e5m",
    "sigma_up_e5m",
)
AT = {name: number for number, name in enumerate(COLUMNS)}
EMPTY: Ints = np.empty((0, len(COLUMNS)), dtype=np.int64)


def stream_of(columns: EpochColumns, rows: Ints, first_row: int, initialisation: Ints, frame: LocalFrame) -> Ints:
    """The table of the given rows, shape (n, len(COLUMNS)); `first_row` is the place of the columns' first epoch."""
    east, north, up = frame.of_columns(columns, rows)
    table = np.empty((len(rows), len(COLUMNS)), dtype=np.int64)
    own = {
        "row": rows + first_row,
        "initialisation": initialisation[rows],
        "east": east,
        "north": north,
        "up": up,
        "sigma_horizontal_e5m": np.maximum(columns.sigma_latitude_e5m, columns.sigma_longitude_e5m)[rows],
        "sigma_up_e5m": columns.sigma_altitude_e5m[rows],
    }
    for name, number in AT.items():
        table[:, number] = own[name] if name in own else getattr(columns, name)[rows]
    return table
