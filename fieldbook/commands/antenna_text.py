"""An antenna in words and as a drawing in plain ASCII: every dimension with its figure, heights in their true order."""

from __future__ import annotations

from collections.abc import Iterator

from fieldbook.model.canonical import Tree

_AXIS = 20  # column of the antenna's axis
_HALF = 8  # half the width of the body


def figures(name: str, antenna: Tree, calibration: Tree | None) -> Iterator[str]:
    """Lines: type, serial, calibration and its offsets, source."""
    yield f"{name}: {antenna['model']}, serial {antenna.get('serial', 'not stated')}"
    if "source" in antenna:
        yield f"source: {antenna['source']}"
    if calibration is None:
        return
    kept = antenna["calibration"]
    whose = f"of serial {calibration['serial']}" if calibration["individual"] else "mean of the type"
    how = " ".join(str(item) for item in (calibration["method"], calibration["by"], calibration["date"]) if item)
    yield f"calibration: {whose}; {how or 'method not stated'}"
    yield f"from: {kept['file']}, SHA-256 {kept['sha256'][:16]}..."
    if calibration["valid_from"] or calibration["valid_until"]:
        yield f"valid: {calibration['valid_from'] or 'ever'} to {calibration['valid_until'] or 'further notice'}"
    pattern = "by zenith angle and azimuth" if calibration["azimuths"] else "by zenith angle"
    yield f"frequencies: {', '.join(calibration['frequencies'])}; pattern {pattern}"
    for choice, (north, east, up) in calibration["offsets_neu_m"].items():
        yield f"ARP to phase centre, {choice}: north {north:+.4f}, east {east:+.4f}, up {up:+.4f} m"


def drawing(antenna: Tree, calibration: Tree | None) -> list[str]:
    """The antenna from the side over its mark; what is not stated says so."""
    above: list[tuple[float, str, str]] = []  # height above the ARP, sign on the axis, words
    if calibration is not None:
        above += [
            (up, "+", f"phase centre {choice}: {up:.4f} m above the ARP")
            for choice, (_, _, up) in calibration["offsets_neu_m"].items()
            if choice in ("L1", "L2", "L5", "L1/L2 ionosphere-free")
        ]
    elif "arp_to_phase_centre_m" in antenna:
        up = antenna["arp_to_phase_centre_m"]["up"]
        choice = antenna.get("offset_frequency", "frequency not stated")
        above.append((float(up), "+", f"phase centre ({choice}): {up} m above the ARP"))
    notch = radius = None
    if "slant_radius_m" in antenna:
        notch, radius = antenna["slant_mark_above_arp_m"], antenna["slant_radius_m"]
        above.append((float(notch), "o", f"notch: {notch} m above the ARP, {radius} m from the axis"))
    above.append((0.0, "=", "ARP, antenna reference point"))
    mount = antenna.get("arp_above_mount_m")
    if mount is not None and float(mount) != 0:
        above.append((-float(mount), "m", f"bottom of the mount: {mount} m below the ARP"))
    above.sort(key=lambda item: -item[0])
    rows = [_ruled(".", "-")]
    rows += [_row(sign, words, inside=height >= 0) for height, sign, words in above]
    for step in range(5):
        slant = " " * (5 + 2 * step) + "\\" if radius is not None else ""
        words = {1: "  s: slant reading, notch to mark" if slant else "", 3: "  v: vertical reading, ARP to mark"}
        rows.append(f"{slant:{_AXIS}}|{words.get(step, '')}".rstrip())
    rows.append("    " + "-" * (_AXIS - 4) + "v" + "-" * (_AXIS - 4) + "  mark")
    rows.append("")
    rows += _formulas(notch, radius, mount)
    if calibration is None and "arp_to_phase_centre_m" not in antenna:
        rows.append("phase centre: not stated; good where the receiver reports the ARP or the mark")
    return rows


def _ruled(corner: str, dash: str) -> str:
    return " " * (_AXIS - _HALF) + corner + dash * (2 * _HALF - 1) + corner


def _row(sign: str, words: str, *, inside: bool) -> str:
    if sign == "o":
        body = " " * 4 + "o" + "-" * (_AXIS - _HALF - 5) + "|" + " " * (2 * _HALF - 1) + "|" + "-" * 7 + "o"
    elif sign == "=":
        body = " " * (_AXIS - _HALF) + "'" + "=" * (_HALF - 1) + "+" + "=" * (_HALF - 1) + "'"
    elif inside:
        body = " " * (_AXIS - _HALF) + "|" + " " * (_HALF - 1) + sign + " " * (_HALF - 1) + "|"
    else:
        body = " " * (_AXIS - 2) + "[" + " |" + " ]" if sign == "m" else " " * _AXIS + sign
    return f"{body:38}{words}"


def _formulas(notch: object, radius: object, mount: object) -> list[str]:
    rows = []
    if radius is not None:
        rows.append(f"slant:    ARP height = sqrt(s^2 - {radius}^2) - {notch}".replace("- -", "+ "))
    else:
        rows.append("slant:    no dimensions stated: vertical readings only")
    if mount is not None:
        rows.append(f"mount:    ARP height = reading to the bottom of the mount + {mount}")
        rows.append(f"rod:      ARP height = fixed length of the rod + {mount}")
    return [*rows, "vertical: ARP height = v"]
