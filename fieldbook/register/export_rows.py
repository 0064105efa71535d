"""What every export says of a mark: the published value in force, or, where asked, what the evidence gives today.

One row, one set of columns for all formats; each column is explained once, in COLUMNS. Numbers are decimal texts as they were
frozen: an export rounds nothing but what is made for people.
"""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.errors import FieldbookError
from fieldbook.model.canonical import Tree, fixed
from fieldbook.reduce import frames

from .evidence import evidence_from_tree
from .fold import RegisterState
from .history import body_of, in_force
from .results import rows_of
from .store import Register

COLUMNS: dict[str, str] = {
    "mark": "number of the mark in the register; never given twice",
    "name": "name of the mark",
    "status": "published (in force), or not published (what the evidence gives today)",
    "number": "number of the published value; empty where not published",
    "published_utc": "time of publication, UTC",
    "published_by": "who published it",
    "supersedes": "number of the value before it",
    "frame": "EPSG code of the geographic 3-D frame of lat, lon, h and x, y, z",
    "frame_name": "its name",
    "epoch": "epoch of the coordinates, decimal year; empty in a static frame",
    "lat_deg": "geodetic latitude, degrees, north positive",
    "lon_deg": "geodetic longitude, degrees, east positive",
    "h_m": "ELLIPSOIDAL height, metres; no height above sea level",
    "x_m": "geocentric X, metres, same frame and epoch",
    "y_m": "geocentric Y, metres",
    "z_m": "geocentric Z, metres",
    "grid": "EPSG code of the projected grid; empty where its occupations ask for several, or it does not reach the mark",
    "easting_m": "grid easting, metres",
    "northing_m": "grid northing, metres",
    "orthometric_m": "height by the geoid model, metres, H = h - N",
    "geoid_model": "the geoid model",
    "vertical_datum": "the vertical datum it realises; empty = none",
    "datum_horizontal95_m": "relative to the DATUM: radius of the 95 % circle, metres, common errors included",
    "datum_vertical95_m": "relative to the DATUM: 95 % half-width of h, metres",
    "datum_class": "its range after FGDC-STD-007.2, horizontal / vertical",
    "between_horizontal95_m": "relative to the NEIGHBOURING MARKS, worst of them: 95 % radius, metres, common errors left out",
    "between_vertical95_m": "relative to the NEIGHBOURING MARKS, worst of them: 95 % half-width of the height difference, metres",
    "cov_xx_m2": "covariance of x, y, z relative to the datum, square metres",
    "cov_xy_m2": "",
    "cov_xz_m2": "",
    "cov_yy_m2": "",
    "cov_yz_m2": "",
    "cov_zz_m2": "",
    "cov_common_xx_m2": "the part of it that is common to other marks or occupations",
    "cov_common_xy_m2": "",
    "cov_common_xz_m2": "",
    "cov_common_yy_m2": "",
    "cov_common_yz_m2": "",
    "cov_common_zz_m2": "",
    "occupations": "number of occupations behind it",
    "evidence": "which: first eight digits of the book's id / occupation",
    "independence": "best grade of any two of them",
    "method": "how they were combined",
    "description": "of the mark",
    "inscription": "on the mark",
    "id": "the mark's own identifier, as books state it",
    "reason": "why it was published",
}
NUMBERS = frozenset(name for name in COLUMNS if name.endswith(("_m", "_m2", "_deg"))) | {"mark", "epoch", "occupations"}
AXES = ("xx", "xy", "xz", "yy", "yz", "zz")
PLACES = ((0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2))


@dataclass(frozen=True)
class ExportRow:
    """One mark: `cells` by column, texts or None. body: the frozen facts. in_force: False where it is not published."""

    cells: dict[str, str | None]
    body: Tree
    in_force: bool


def export_rows(register: Register, *, today: bool = False) -> list[ExportRow]:
    """Marks with a value in force, in order of number; with `today` all that the evidence gives a coordinate.

    Raises:
        BookError: evidence is missing or damaged.
    """
    state = register.state()
    if today:
        return [
            _row(register, state, body_of(state, row, None, "not published"), None)
            for row in rows_of(register)
            if row.value.place is not None
        ]
    found = []
    for number in state.marks():
        held = in_force(state, number)
        if held is not None:
            found.append(_row(register, state, held.entry.body, (held.entry.utc, held.entry.observer)))
    return found


def _row(register: Register, state: RegisterState, body: Tree, published: tuple[str, str] | None) -> ExportRow:
    place, height, datum, between = body["place"], body["height"], body["datum_accuracy"], body["between_accuracy"]
    mark = state.marks()[state.root_of(int(body["mark"]))]
    xyz = place["xyz_m"] or (None, None, None)
    cells: dict[str, str | None] = {
        "mark": str(mark.number),
        "name": str(body["name"]),
        "status": "not published" if published is None else "published",
        "number": str(body["number"]) or None,
        "published_utc": None if published is None else published[0],
        "published_by": None if published is None else published[1],
        "supersedes": body.get("supersedes"),
        "frame": place["frame"],
        "frame_name": place["frame_name"],
        "epoch": place["epoch"],
        "lat_deg": place["lat_deg"],
        "lon_deg": place["lon_deg"],
        "h_m": place["h_m"],
        "x_m": xyz[0],
        "y_m": xyz[1],
        "z_m": xyz[2],
        **_grid(register, body),
        "orthometric_m": None if height is None else height["orthometric_m"],
        "geoid_model": None if height is None else height["model"],
        "vertical_datum": None if height is None else height["datum"],
        "datum_horizontal95_m": datum["horizontal95_m"],
        "datum_vertical95_m": datum["vertical95_m"],
        "datum_class": " / ".join(item or "not known" for item in datum["class"]),
        "between_horizontal95_m": between["horizontal95_worst_m"],
        "between_vertical95_m": between["vertical95_worst_m"],
        **_covariance(body),
        "occupations": str(len(body["evidence"])),
        "evidence": " ".join(f"{book[:8]}/{number}" for book, number, _ in body["evidence"]),
        "independence": body["independence"],
        "method": body["method"],
        **{key: next((str(t[key]) for _, _, t in mark.described if t.get(key)), None) for key in ("description", "inscription", "id")},
        "reason": body["reason"],
    }  # fmt: skip
    return ExportRow({name: cells[name] for name in COLUMNS}, body, published is not None)


def _grid(register: Register, body: Tree) -> dict[str, str | None]:
    """The grid that all evidence asks for; none where they differ or it does not reach the mark."""
    none: dict[str, str | None] = {"grid": None, "easting_m": None, "northing_m": None}
    codes = {evidence_from_tree(register.kept_tree(sha)).grid for _, _, sha in body["evidence"]}
    code = codes.pop() if len(codes) == 1 else None
    if code is None:
        return none
    place = body["place"]
    h_m = None if place["h_m"] is None else float(place["h_m"])
    lat, lon = float(place["lat_deg"]), float(place["lon_deg"])
    try:
        grid = frames.project(str(place["frame"]), code, lat, lon, h_m, outside_area_accepted=False)
    except FieldbookError:
        return none
    return {"grid": code, "easting_m": fixed(grid.easting_m, 6), "northing_m": fixed(grid.northing_m, 6)}


def _covariance(body: Tree) -> dict[str, str | None]:
    own, common = body["cov_own_m2"], body["cov_common_m2"]
    found: dict[str, str | None] = {}
    for name, (i, j) in zip(AXES, PLACES, strict=True):
        total = None if own is None or common is None else float(own[i][j]) + float(common[i][j])
        found[f"cov_{name}_m2"] = fixed(total, 18)
    for name, (i, j) in zip(AXES, PLACES, strict=True):
        found[f"cov_common_{name}_m2"] = None if common is None else common[i][j]
    return found
