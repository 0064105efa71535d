"""Session file to `Session`: every key known, every word allowed, every number as typed, every condition met.

In: TOML text, or the tree an `occupation` entry keeps. Out: a frozen `Session` with its canonical tree. What can go
wrong is a `UsageError` that names the key, the line, the nearest known key and the remedy; nothing else is raised.
Whether a frame code may be used at all is the gateway's question (`reduce.frames.check_frames`), not this module's.
"""

from __future__ import annotations

from decimal import Decimal
from pathlib import Path
from typing import Any

from fieldbook.errors import UsageError
from fieldbook.model import session as model
from fieldbook.model.calibration import FrozenCalibration
from fieldbook.model.canonical import Tree, normalised
from fieldbook.settings.antenna_rules import antenna_conditions, reading_conditions
from fieldbook.settings.antenna_source import with_antenna
from fieldbook.settings.antex import block_calibration
from fieldbook.settings.grids import with_geoid_hash
from fieldbook.settings.schema import REQUIRED, TABLES, TOP_LEVEL
from fieldbook.settings.toml_lines import line_of
from fieldbook.settings.toml_text import BadToml, toml_tree
from fieldbook.settings.values import BadValue, checked, nearest

MAX_BYTES = 1 << 20  # a session file is a page of text; a megabyte is a mistake or an attack


class _Where:
    """Says where a key stands: file name and line for a file, 'stored session' for a tree."""

    def __init__(self, name: str, text: str | None) -> None:
        self.name, self.text = name, text

    def __call__(self, table: str, key: str | None = None) -> str:
        line = line_of(self.text, table, key) if self.text is not None else None
        return f"{self.name}, line {line}" if line else self.name


def load_session(path: Path) -> model.Session:
    """Read and check a session file.

    What `antenna.antex` and `antenna.listed` name is read here and frozen into the tree.

    Raises:
        UsageError: missing, not TOML, or anything in it that is not as it must be.
    """
    try:
        if path.stat().st_size > MAX_BYTES:
            raise UsageError(f"{path} is larger than 1 MB and no session file.", "Name the session's TOML file.")
        data = path.read_bytes()
    except OSError as problem:
        raise UsageError(
            f"The session file {path} cannot be read: {problem.strerror or problem}.",
            "Check the path; a session file is a TOML text, see the README.",
        ) from None
    try:
        text = data.decode("utf-8-sig")
        tree = toml_tree(text)
    except UnicodeDecodeError:
        raise UsageError(f"{path} is no text file.", "Name the session's TOML file.") from None
    except BadToml as problem:
        raise UsageError(f"{path} is no valid TOML: {problem}.", "Correct that line.") from None
    return _build(_frozen(tree, path.resolve().parent), _Where(path.name, text), stored=False)


def _frozen(tree: Tree, base_dir: Path) -> Tree:
    """What the session names outside itself, put into it: antenna, and the hash of the geoid file."""
    return with_geoid_hash(with_antenna(tree, base_dir), base_dir)


def session_from_tree(tree: Tree) -> model.Session:
    """The same checks for a tree kept in a book or composed by a screen (numbers may be decimal texts).

    Raises:
        UsageError: anything in it that is not as it must be.
    """
    return _build(tree, _Where("session", None), stored=True)


def merged(tree: Tree, changes: Tree) -> Tree:
    """A session tree with the changes of a `setup` entry (`{"setup": {...}, "antenna": {...}}`) put in."""
    result = dict(tree)
    for table, keys in changes.items():
        if isinstance(keys, dict) and table in TOP_LEVEL:
            result[table] = {**result.get(table, {}), **keys}
    return result


def _build(raw: Tree, where: _Where, *, stored: bool) -> model.Session:
    for name in raw:
        if name not in TOP_LEVEL:
            raise UsageError(
                f'{where(name)}: there is no table or key "{name}" in a session.{nearest(name, TOP_LEVEL)}',
                "Rename or remove it.",
            )
    tree = {name: _table(name, raw[name], where, stored=stored) for name in TOP_LEVEL if name in raw}
    for name in TOP_LEVEL:
        for key in REQUIRED.get(name, ()):
            if key not in tree.get(name, {}):
                place = where(name) if name in tree else where.name
                raise UsageError(
                    f"{place}: {name}.{key} is missing.",
                    f"Write it in the table [{name}]; it has no default.",
                )
    _conditions(tree, where)
    tree = normalised(tree)
    return _session(tree)


def _table(name: str, raw: Any, where: _Where, *, stored: bool) -> Tree:
    if not isinstance(raw, dict):
        raise UsageError(f"{where(name)}: {name} must be a table.", f"Write [{name}] on its own line.")
    keys, result = TABLES[name], {}
    for key, value in raw.items():
        if key not in keys:
            raise UsageError(
                f'{where(name, key)}: there is no key "{key}" in [{name}].{nearest(key, keys)}',
                "Rename or remove it.",
            )
        result[key] = _value(name, key, keys[key], value, where, stored=stored)
    if name not in TOP_LEVEL:
        for key in REQUIRED.get(name, ()):
            if key not in result:
                raise UsageError(
                    f"{where(name)}: {name}.{key} is missing.",
                    "Write it beside the others; it has no default.",
                )
    return result


def _value(table: str, key: str, kind: str, value: Any, where: _Where, *, stored: bool) -> Any:
    place = where(table, key)
    if kind.startswith("inline:"):
        return _table(kind.removeprefix("inline:"), value, where, stored=stored)
    if kind.startswith("list:"):
        inner = kind.removeprefix("list:")
        if not isinstance(value, list):
            raise UsageError(f"{place}: {table}.{key} must be a list of tables.", f"Write [[{inner}]] before each.")
        return [_table(inner, item, where, stored=stored) for item in value]
    try:
        return checked(kind, value, stored=stored)
    except BadValue as problem:
        raise UsageError(f"{place}: {table}.{key} {problem}.".replace("..", "."), "Correct the value.") from None


def _conditions(tree: Tree, where: _Where) -> None:
    setup, antenna = tree["setup"], tree["antenna"]
    if setup["reported_point"] == "mark" and "receiver_height_m" not in setup:
        raise UsageError(
            f'{where("setup", "reported_point")}: reported_point = "mark" needs the height keyed into the receiver.',
            "Write setup.receiver_height_m: a height taken off twice is the classic blunder.",
        )
    antenna_conditions(tree, where)
    for item in setup.get("height", []):
        reading_conditions(item, antenna, where)
    if setup.get("support") == "pole" and "pole_length_m" not in setup:
        raise UsageError(f"{where('setup', 'support')}: a pole needs setup.pole_length_m.", "Write its length.")
    for index, item in enumerate(tree["frame"].get("motion", []), start=1):
        if ("velocity_m_per_year" in item) == ("model" in item):
            raise UsageError(
                f"{where('frame.motion')}: motion {index} needs either model and plate, or velocity_m_per_year.",
                "State one of them, with sigma_m_per_year and source.",
            )


def _float(tree: Tree, key: str) -> float | None:
    return float(tree[key]) if key in tree else None


def _epoch(tree: Tree, key: str) -> float | str | None:
    value = tree.get(key)
    return value if value is None or value == "observation" else float(value)


def _session(tree: Tree) -> model.Session:
    return model.Session(
        job=model.Job(**tree["job"]),
        requirement=_requirement(tree["requirement"]),
        frame=_frame(tree["frame"]),
        corrections=_corrections(tree["corrections"]),
        mark=_mark(tree["mark"]),
        antenna=_antenna(tree["antenna"]),
        setup=_setup(tree["setup"]),
        receiver=_receiver(tree["receiver"]),
        tree=tree,
    )


def _corrections(tree: Tree) -> model.Corrections:
    plain = {key: value for key, value in tree.items() if key not in ("u95_m", "distance_m")}
    return model.Corrections(**plain, u95_m=_float(tree, "u95_m"), distance_m=_float(tree, "distance_m"))


def _requirement(tree: Tree) -> model.Requirement:
    qualities = tuple(tree["accept_quality"])
    return model.Requirement(
        horizontal_95_m=float(tree["horizontal_95_m"]),
        vertical_95_m=float(tree["vertical_95_m"]),
        accept_quality=qualities,
        occupations=tree["occupations"],
        in_frame=tree.get("in", "receiver frame"),
        minimum_time_s=_float(tree, "minimum_time_s"),
        # two independent initialisations are the only defence against a wrong RTK fix: judged unless stated
        initialisations=tree.get("initialisations", 2 if 4 in qualities else None),
        hours_between=_float(tree, "hours_between"),
        height_readings=tree.get("height_readings", "before and after"),
        max_hdop=_float(tree, "max_hdop"),
        max_pdop=_float(tree, "max_pdop"),
        max_correction_age_s=_float(tree, "max_correction_age_s"),
        min_satellites=tree.get("min_satellites"),
        source=tree.get("source"),
    )


def _frame(tree: Tree) -> model.FrameChoice:
    taken = tuple(
        model.TakenAs(item["code"], item["as"], item["source"], float(item["sigma_m"]))
        for item in tree.get("taken_as", [])
    )
    motion = tuple(
        model.Motion(
            item.get("model"),
            item.get("plate"),
            _float(item, "sigma_m_per_year"),
            tuple(float(part) for part in item["velocity_m_per_year"]) if "velocity_m_per_year" in item else None,  # type: ignore[arg-type]
            item.get("source"),
        )
        for item in tree.get("motion", [])
    )
    return model.FrameChoice(
        receiver=tree["receiver"],
        client=tree["client"],
        receiver_epoch=_epoch(tree, "receiver_epoch"),
        client_epoch=_epoch(tree, "client_epoch"),
        realisation=tree.get("realisation"),
        grid=tree.get("grid"),
        geoid=tree.get("geoid"),
        geoid_sha256=tree.get("geoid_sha256"),
        taken_as=taken,
        motion=motion,
    )


def _mark(tree: Tree) -> model.Mark:
    witnesses = tuple(
        model.WitnessMark(item["text"], _float(item, "azimuth_deg"), _float(item, "distance_m"))
        for item in tree.get("witness_marks", [])
    )
    approximate = tree.get("approximate", {})
    plain = {
        key: tree[key] for key in ("name", "description", "id", "inscription", "access", "condition") if key in tree
    }
    return model.Mark(
        **plain,
        witness_marks=witnesses,
        approximate_lat_deg=_float(approximate, "lat_deg"),
        approximate_lon_deg=_float(approximate, "lon_deg"),
    )


def _antenna(tree: Tree) -> model.Antenna:
    offset = tree.get("arp_to_phase_centre_m", {})
    return model.Antenna(
        model=tree["model"],
        serial=tree.get("serial"),
        orientation_deg=_float(tree, "orientation_deg"),
        arp_to_phase_centre_north_m=_float(offset, "north"),
        arp_to_phase_centre_east_m=_float(offset, "east"),
        arp_to_phase_centre_up_m=_float(offset, "up"),
        offset_frequency=tree.get("offset_frequency"),
        slant_radius_m=_float(tree, "slant_radius_m"),
        slant_mark_above_arp_m=_float(tree, "slant_mark_above_arp_m"),
        arp_above_mount_m=_float(tree, "arp_above_mount_m"),
        receiver_applies=tree.get("receiver_applies"),
        source=tree.get("source"),
        calibration=_calibration(tree.get("calibration")),
    )


def _calibration(tree: Tree | None) -> FrozenCalibration | None:
    if tree is None:
        return None
    return FrozenCalibration(block_calibration(tree["block"], tree["file"]), tree["file"], tree["sha256"])


def reading_from_tree(tree: Tree, seq: int | None = None) -> model.HeightReading:
    """A height reading from its canonical keys (a `[[setup.height]]` table or the body of a `height` entry)."""
    return model.HeightReading(
        method=tree["method"],
        value=Decimal(tree["value"]),
        unit=tree["unit"],
        when=tree["when"],
        at=tree.get("at"),
        reader=tree.get("reader"),
        time=tree.get("time"),
        sigma_m=_float(tree, "sigma_m"),
        seq=seq,
        tape_offset_m=_float(tree, "tape_offset_m"),
    )


def _setup(tree: Tree) -> model.Setup:
    return model.Setup(
        reported_point=tree["reported_point"],
        centring=tree["centring"],
        centring_sigma_m=float(tree["centring_sigma_m"]),
        receiver_height_m=_float(tree, "receiver_height_m"),
        support=tree.get("support"),
        pole_length_m=_float(tree, "pole_length_m"),
        bubble_arcmin=_float(tree, "bubble_arcmin"),
        tribrach_id=tree.get("tribrach_id"),
        last_check=tree.get("last_check"),
        reading_sigma_m=_float(tree, "reading_sigma_m"),
        inscription_read=tree.get("inscription_read"),
        heights=tuple(reading_from_tree(item) for item in tree.get("height", [])),
    )


def _receiver(tree: Tree) -> model.Receiver:
    override = tree.get("class")
    fix_class = (
        model.FixClass(
            float(override["horizontal_m"]),
            float(override["vertical_m"]),
            float(override["correlation_s"]),
            override["source"],
        )
        if override
        else None
    )
    plain = {key: value for key, value in tree.items() if key != "class"}
    return model.Receiver(**plain, fix_class=fix_class)
