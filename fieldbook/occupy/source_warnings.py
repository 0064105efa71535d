"""What the decoder noticed about the source as a whole, in the words of a finding.

The decoder gives codes; here each gets its severity and one sentence of what to do. They are entered when the
occupation ends and shown as alarms while it is recorded.
"""

from __future__ import annotations

WARNINGS: dict[str, tuple[str, str]] = {
    "no_valid_nmea": ("caution", "Bytes came, but no valid NMEA sentence: check the speed and the output format."),
    "mixed_receivers": (
        "stop",
        "Sentences of two receivers are mixed on this link: choose one with `entry BOOK decision --set talker=...`.",
    ),
    "two_sources": ("caution", "Two position sentences of one instant disagree: switch one of them off."),
    "simulator_output": ("caution", "The receiver marks fixes as simulated (quality 8): leave its simulator mode."),
    "manual_position": ("caution", "The receiver marks fixes as entered by hand (quality 7)."),
    "dead_reckoning": ("caution", "The receiver marks fixes as dead reckoning (quality 6)."),
    "date_jump": (
        "caution",
        "The receiver's date jumped: check it, and decide with `entry BOOK decision --set date=...`.",
    ),
    "rollover_suspected": (
        "caution",
        "The receiver's date is 1024 weeks or more off this computer's: an old receiver counts weeks anew. "
        "Decide with `entry BOOK decision --set rollover_weeks=1024`.",
    ),
}


def finding_of(code: str) -> tuple[str, str]:
    """Severity and text of a decoder's warning; a code without words is shown as it is."""
    return WARNINGS.get(code, ("caution", f"The decoder warns: {code}."))
