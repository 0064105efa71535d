"""The drawing of which distance is asked for, with the figures in it, and the readings judged as they are typed.

The numbers come from `reduce.antenna` through the bridge; here they are only placed.
"""

from __future__ import annotations

from collections.abc import Sequence

from fieldbook.model.reduction import AntennaHeight, Finding, ReadingReduced
from fieldbook.model.session import Antenna
from fieldbook.screens.plain import fit
from fieldbook.screens.rows import BLANK, Row, paragraph, row


def metres(value_m: float | None, decimals: int = 4) -> str:
    """`1.4946 m`, or a blank to be filled."""
    return "…" if value_m is None else f"{value_m:.{decimals}f} m"


def drawing(method: str, typed: str, arp_m: float | None, antenna: Antenna | None) -> list[Row]:
    """The antenna over its mark, 37 cells wide, 13 rows high; the distance being read is named on its line."""
    if method == "slant":
        return _slant(typed, arp_m, antenna)
    if method in ("mount", "rod"):
        return _to_mount(method, typed, arp_m, antenna)
    return _vertical(typed, arp_m)


def _slant(typed: str, arp_m: float | None, antenna: Antenna | None) -> list[Row]:
    radius = antenna.slant_radius_m if antenna else None
    above = antenna.slant_mark_above_arp_m if antenna else None
    height = metres(arp_m) if arp_m is not None else ""
    return [
        row("       ┌─────────────┐"),
        row("   ", ("●", "accent"), "───┤             ├───●"),
        row("   ", ("╲", "accent"), "   └──────┬──────┘   ", ("rim notch ●", "accent")),
        row("    ", ("╲", "accent"), "        ┬ ", ("ARP", "strong"), f"   {metres(above, 3)} over ARP"),
        row("     ", ("╲", "accent"), "       │"),
        row("      ", ("╲", "accent"), "      │   rim radius"),
        row("       ", ("╲", "accent"), f"     │   {metres(radius, 3)}"),
        row("  ", ("slant", "accent"), " ", ("╲", "accent"), "    │"),
        row("  ", (fit(typed, 14) or "…", "accent"), *_gap(typed), ("ARP height", "strong")),
        row("          ", ("╲", "accent"), "  │ ", (height, "strong")),
        row("           ", ("╲", "accent"), " │"),
        row("            ", ("╲", "accent"), "│"),
        row("     ────────▼──────── mark"),
    ]


def _gap(typed: str) -> tuple[tuple[str, str], ...]:
    used = 2 + len(fit(typed, 14) or "…")
    if used < 9:
        return ((" " * (9 - used), "text"), ("╲", "accent"), ("   │ ", "text"))
    return ((" " * max(1, 13 - used), "text"), ("│ ", "text"))


def _vertical(typed: str, arp_m: float | None) -> list[Row]:
    return [
        row("       ┌─────────────┐"),
        row("       │   antenna   │"),
        row("       └──────┬──────┘"),
        row("              ", ("▲", "accent"), " ", ("ARP", "strong"), " lowest face"),
        row("              ", ("│", "accent")),
        row("              ", ("│", "accent"), " ", ("vertical", "accent")),
        row("              ", ("│", "accent"), " ", (fit(typed, 16) or "…", "accent")),
        row("              ", ("│", "accent")),
        row("              ", ("│", "accent"), " ", ("ARP height", "strong")),
        row("              ", ("│", "accent"), " ", (metres(arp_m) if arp_m is not None else "", "strong")),
        row("              ", ("│", "accent")),
        row("              ", ("│", "accent")),
        row("     ─────────", ("▼", "accent"), "───────── mark"),
    ]


def _to_mount(method: str, typed: str, arp_m: float | None, antenna: Antenna | None) -> list[Row]:
    above = antenna.arp_above_mount_m if antenna else None
    stem = "│" if method == "mount" else "║"
    name, what = ("mount", "bottom of mount") if method == "mount" else ("rod, fixed", "top of the rod")
    return [
        row("       ┌─────────────┐"),
        row("       │   antenna   │"),
        row("       └──────┬──────┘ ", ("ARP", "strong")),
        row("            ┌─┴─┐  ┬"),
        row("            │   │  ┴ ", (metres(above), "text")),
        row("            └─", ("▲", "accent"), "─┘ ", (what, "accent")),
        row("              ", (stem, "accent"), " ", (name, "accent")),
        row("              ", (stem, "accent"), " ", (fit(typed, 16) or "…", "accent")),
        row("              ", (stem, "accent")),
        row("              ", (stem, "accent"), " ", ("ARP height", "strong")),
        row("              ", (stem, "accent"), " ", (metres(arp_m) if arp_m is not None else "", "strong")),
        row("              ", (stem, "accent")),
        row("     ─────────", ("▼", "accent"), "───────── mark"),
    ]


def reading_row(item: ReadingReduced, width: int) -> Row:
    """`before slant 1.5320 m  ARP 1.4946 m`."""
    at = f"  {item.at}" if item.at else ""
    tape = f"{1000 * item.tape_offset_m:+.1f} mm " if item.tape_offset_m else ""
    text = f" {item.when} {item.method} {item.value} {item.unit} {tape}"
    arp = f" ARP {item.arp_m:.4f} m"
    return row(text, (arp, "strong"), (fit(at, max(0, width - len(text) - len(arp) - 1)), "soft"))


def readings_block(
    height: AntennaHeight | None, findings: Sequence[Finding], width: int, rule: str | None
) -> list[Row]:
    """Every reading with its ARP height, what is still to read, and the judgement in words."""
    readings = height.readings if height else []
    rows = [reading_row(item, width) for item in readings]
    wanted = ("before", "after") if rule == "before and after" else ()
    for when in wanted:
        if not any(item.when == when for item in readings):
            rows.append(row(f" {when:7}", ("not read yet", "warn")))
    if not readings and not wanted:
        rows.append(row((" no reading yet", "warn")))
    rows.append(BLANK)
    if height and height.height_arp_m is not None:
        u = f"  u {1000 * height.height_u_m:.1f} mm" if height.height_u_m is not None else ""
        rows.append(row(" ARP above mark  ", (f"{height.height_arp_m:.4f} m", "strong"), (u, "soft")))
    return rows + judgement(readings, findings, width)


def disagree(findings: Sequence[Finding]) -> str:
    """Why readings must be read again; empty if they need not."""
    return next(
        (item.text for item in findings if item.severity == "stop" and item.code != "height_reading_missing"), ""
    )


def judgement(readings: Sequence[ReadingReduced], findings: Sequence[Finding], width: int) -> list[Row]:
    """Whether the readings agree, in words."""
    wrong = [item for item in findings if item.severity == "stop" and item.code != "height_reading_missing"]
    if wrong:
        rows: list[Row] = []
        for item in wrong:
            rows += paragraph(item.text, width, style="bad", mark=("■ READ AGAIN", "bad"), most=8)
        return rows
    if len(readings) < 2:
        return []
    heights = [item.arp_m for item in readings]
    spread = 1000 * (max(heights) - min(heights))
    return [row((" ✓ ", "good"), f"readings agree: {spread:.1f} mm apart")]
