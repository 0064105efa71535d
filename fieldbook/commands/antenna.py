"""`fieldbook antenna`: the user's own list of antennas, from ANTEX files or typed in, with a drawing of the dimensions."""

from __future__ import annotations

from decimal import Decimal, InvalidOperation
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fieldbook.commands.output import line, note, write_json
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, normalised

if TYPE_CHECKING:
    from fieldbook.model.calibration import AntennaCalibration

SCHEMA = "fieldbook.antenna/1"


@click.group("antenna", help="Your own antennas: add from an ANTEX file or typed in, list, show with a drawing.")
def command() -> None:
    """The group."""


def metres(text: str) -> Decimal:
    """A length as typed.

    Raises:
        UsageError: no number, or more than ten metres.
    """
    try:
        number = Decimal(text)
    except InvalidOperation:
        number = Decimal("NaN")
    if not number.is_finite() or abs(number) > 10:
        raise UsageError(f'"{text}" is no length in metres.', "Write for example 0.1500.")
    return number


@command.command(
    "add",
    help="Add an antenna to your list: a block of the ANTEX file FILE, or typed in without FILE. A session takes it with "
    "antenna.listed = NAME; nothing is taken that is not named.",
)
@click.argument("file", required=False, type=click.Path(path_type=Path))
@click.option("--type", "model", required=True, help='Type and radome, such as "DEMO-A1 NONE".')
@click.option("--name", help="Name in your list; without it type, radome and serial.")
@click.option("--serial", help="Serial number: takes the antenna's own calibration where the file has one.")
@click.option("--entry", type=int, help="Number of the block in the file, where several fit.")
@click.option("--slant-radius-m", type=metres, help="Rim or notch from the antenna's axis (a radius, not a diameter).")
@click.option("--slant-mark-above-arp-m", type=metres, help="Rim or notch above the ARP.")
@click.option("--arp-above-mount-m", type=metres, help="ARP above the bottom of the mount; 0 where they are the same.")
@click.option("--north-m", type=metres, help="Typed in: ARP to phase centre, north.")
@click.option("--east-m", type=metres, help="Typed in: ARP to phase centre, east.")
@click.option("--up-m", type=metres, help="Typed in: ARP to phase centre, up.")
@click.option("--frequency", help='Typed in: signals the offset is of, such as "L1".')
@click.option("--source", help="Where typed values are from; printed on the certificate.")
@click.option("--replace", is_flag=True, help="Write over an antenna of the same name.")
@click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")
def add(
    file: Path | None,
    model: str,
    name: str | None,
    serial: str | None,
    entry: int | None,
    *,
    replace: bool,
    as_json: bool,
    **typed: Any,
) -> None:
    """Choose, check, write."""
    from fieldbook.model.calibration import split_model
    from fieldbook.settings.antennas import antenna_path, listed_antenna, listed_text

    antenna: Tree = {"model": " ".join(part for part in split_model(model) if part)}
    if serial:
        antenna["serial"] = serial
    antenna |= _typed(typed, from_file=file is not None)
    if file is not None:
        antenna["calibration"] = _block(file, model, serial, entry)
    elif not split_model(model)[1]:
        raise UsageError(
            f'--type "{model}" states no radome.', 'Write it behind the type, "NONE" only where the antenna is bare.'
        )
    chosen = name or "-".join(
        "".join(letter if letter.isalnum() or letter in "._+-" else "-" for letter in part)
        for part in (*split_model(model), serial or "")
        if part
    )
    path = antenna_path(chosen)
    if path.exists() and not replace:
        raise UsageError(
            f'Your list has an antenna "{chosen}" already.', "Give another --name, or add --replace.", code="out_exists"
        )
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(listed_text(antenna), encoding="utf-8")
    listed_antenna(chosen)  # what was written is read back as it will be read later
    if as_json:
        write_json({"schema": SCHEMA, "name": chosen, "path": str(path), "antenna": _brief(antenna)})
    else:
        note(f"written: {path}")
        line(f'{chosen}: {antenna["model"]}; in a session write antenna.listed = "{chosen}"')


def _typed(typed: dict[str, Any], *, from_file: bool) -> Tree:
    """Dimensions and offset as typed, complete or refused."""
    antenna: Tree = {key: typed[key] for key in ("source",) if typed[key]}
    for key in ("slant_radius_m", "slant_mark_above_arp_m", "arp_above_mount_m"):
        if typed[key] is not None:
            antenna[key] = typed[key]
    if ("slant_radius_m" in antenna) != ("slant_mark_above_arp_m" in antenna):
        raise UsageError(
            "A slant reading needs both --slant-radius-m and --slant-mark-above-arp-m.", "Give both, or none."
        )
    if "slant_radius_m" in antenna and antenna["slant_radius_m"] <= 0:
        raise UsageError("--slant-radius-m must be above zero.", "It is the horizontal distance of the notch.")
    parts = {name: typed[f"{name}_m"] for name in ("north", "east", "up") if typed[f"{name}_m"] is not None}
    if from_file and (parts or typed["frequency"]):
        raise UsageError("An offset is either typed in or taken from FILE.", "Leave one of them out.")
    if parts:
        if len(parts) < 3 or not typed["frequency"] or not typed["source"]:
            raise UsageError(
                "A typed offset needs --north-m, --east-m, --up-m, --frequency and --source.",
                "Nothing of it has a default.",
            )
        antenna["arp_to_phase_centre_m"] = parts
        antenna["offset_frequency"] = typed["frequency"]
    if not from_file and len(antenna.keys() - {"source"}) == 0:
        raise UsageError("Nothing is said of this antenna.", "Give FILE, an offset, or dimensions.")
    return antenna


def _block(file: Path, model: str, serial: str | None, entry: int | None) -> Tree:
    from fieldbook.settings.antenna_source import choose_block, frozen
    from fieldbook.settings.antex import read_antex

    found = read_antex(file)
    return frozen(found, choose_block(found, model, serial, entry))


def _brief(antenna: Tree) -> Tree:
    """For JSON: the calibration in figures instead of its text."""
    tree: Tree = normalised({key: value for key, value in antenna.items() if key != "calibration"})
    kept = antenna.get("calibration")
    if kept:
        tree["calibration"] = {"file": kept["file"], "sha256": kept["sha256"], **_calibration_tree(_parsed(kept))}
    return tree


def _parsed(kept: Tree) -> AntennaCalibration:
    from fieldbook.settings.antex import block_calibration

    return block_calibration(kept["block"], kept["file"])


def _calibration_tree(calibration: AntennaCalibration) -> Tree:
    from fieldbook.reduce.phase_centre import alternatives

    return {
        "type": calibration.model,
        "serial": calibration.serial or None,
        "individual": calibration.individual,
        "method": calibration.method or None,
        "by": calibration.agency or None,
        "date": calibration.date or None,
        "valid_from": calibration.valid_from,
        "valid_until": calibration.valid_until,
        "frequencies": [item.code for item in calibration.frequencies],
        "azimuths": any(item.azimuths_deg for item in calibration.frequencies),
        "offsets_neu_m": alternatives(calibration),
    }


@command.command("list", help="Your antennas; with FILE the receiver antennas of an ANTEX file.")
@click.argument("file", required=False, type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def list_antennas(file: Path | None, *, as_json: bool) -> None:
    """Read and tell."""
    if file is not None:
        _list_file(file, as_json=as_json)
        return
    from fieldbook.settings.antennas import antennas_folder, listed_antenna, listed_names

    antennas = {name: listed_antenna(name) for name in listed_names()}
    if as_json:
        write_json({"schema": SCHEMA, "antennas": [{"name": name, **_brief(tree)} for name, tree in antennas.items()]})
        return
    if not antennas:
        note(f"no antenna in {antennas_folder()}; `fieldbook antenna add` adds one")
    for name, tree in antennas.items():
        serial = f", serial {tree['serial']}" if "serial" in tree else ""
        what = [
            word
            for key, word in (
                ("calibration", f"calibration of {tree.get('calibration', {}).get('file')}"),
                ("arp_to_phase_centre_m", "offset typed in"),
                ("slant_radius_m", "slant"),
                ("arp_above_mount_m", "mount"),
            )
            if key in tree
        ]
        line(f"{name}: {tree['model']}{serial}; {', '.join(what)}")


def _list_file(file: Path, *, as_json: bool) -> None:
    from fieldbook.settings.antex import read_antex

    found = read_antex(file)
    if as_json:
        blocks = [
            {"entry": block.entry, "line": block.line, "type": block.type_field, "serial": block.serial or None}
            for block in found.blocks
        ]
        tree = {"file": found.name, "sha256": found.sha256, "version": found.version, "absolute": found.absolute}
        write_json({"schema": SCHEMA, **tree, "satellites": found.satellites, "antennas": blocks})
        return
    kind = "absolute" if found.absolute else f"relative to {found.reference or 'a reference antenna'}: not usable"
    note(f"{found.name}: ANTEX {found.version}, {kind}, {found.satellites} satellites left out")
    for block in found.blocks:
        whose = f"serial {block.serial}" if block.serial else "mean of the type"
        line(f"{block.entry:4}  {block.type_field:20}  {whose}")


@command.command("show", help="One antenna of your list, with a drawing of its dimensions.")
@click.argument("name")
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def show(name: str, *, as_json: bool) -> None:
    """Figures and drawing."""
    from fieldbook.commands.antenna_text import drawing, figures
    from fieldbook.settings.antennas import listed_antenna

    antenna = listed_antenna(name)
    if as_json:
        write_json({"schema": SCHEMA, "name": name, "antenna": _brief(antenna)})
        return
    calibration = _calibration_tree(_parsed(antenna["calibration"])) if "calibration" in antenna else None
    for text in (*figures(name, antenna, calibration), "", *drawing(antenna, calibration)):
        line(text)
