"""The table of themes and the contrast of its colours.

Four lights a field book is read in: noon (black on white), dusk, lamp (red on black, keeps the eye dark-adapted),
console (sixteen-colour terminals, plots in ASCII). Colour never carries meaning alone: every state is a word or a
shape first. Contrast is WCAG 2.2's ratio of relative luminances (success criteria 1.4.3: 4.5:1, 1.4.6: 7:1).
The second hues of noon and dusk are darkened or lightened Okabe-Ito colours, chosen for that ratio.
"""

from __future__ import annotations

from dataclasses import dataclass

from textual.theme import Theme


@dataclass(frozen=True)
class Palette:
    """Colours as #rrggbb. Each of the inks must be legible on `paper`; `chosen_ink` on `chosen`; and so on."""

    name: str
    paper: str
    ink: str
    soft: str
    good: str
    warn: str
    bad: str
    accent: str
    rule: str
    chosen: str
    chosen_ink: str
    alarm: str
    alarm_ink: str
    field: str
    dark: bool
    ascii_only: bool = False

    def pairs(self) -> list[tuple[str, str, str]]:
        """(what, ink, paper) of every text the screens draw."""
        inks = ("ink", "soft", "good", "warn", "bad", "accent", "rule")
        on_paper = [(name, getattr(self, name), self.paper) for name in inks]
        others = [("chosen", self.chosen_ink, self.chosen), ("alarm", self.alarm_ink, self.alarm)]
        return [*on_paper, *others, ("field", self.ink, self.field), ("hint", self.soft, self.field)]


PALETTES = (
    Palette(
        "noon", paper="#ffffff", ink="#000000", soft="#3a3a3a", good="#00513a", warn="#6b3a00", bad="#8a0f00",
        accent="#003f6b", rule="#4a4a4a", chosen="#000000", chosen_ink="#ffffff", alarm="#8a0f00",
        alarm_ink="#ffffff", field="#e4e4e4", dark=False,
    ),
    Palette(
        "dusk", paper="#1b1e24", ink="#e9e6dc", soft="#b3b1a8", good="#5fd0ac", warn="#f0b545", bad="#ff9d80",
        accent="#7cc4f2", rule="#9a988f", chosen="#e9e6dc", chosen_ink="#1b1e24", alarm="#f0b545",
        alarm_ink="#1b1e24", field="#33373f", dark=True,
    ),
    Palette(
        "lamp", paper="#000000", ink="#ff5a4a", soft="#e04a3c", good="#ff7a66", warn="#ff8f70", bad="#ffb09a",
        accent="#ff6d5a", rule="#d8402f", chosen="#ff5a4a", chosen_ink="#000000", alarm="#ffb09a",
        alarm_ink="#000000", field="#2a0703", dark=True,
    ),
    Palette(
        "console", paper="#000000", ink="#ffffff", soft="#c0c0c0", good="#00ff00", warn="#ffff00", bad="#ffff00",
        accent="#00ffff", rule="#c0c0c0", chosen="#ffffff", chosen_ink="#000000", alarm="#ffff00",
        alarm_ink="#000000", field="#000080", dark=True, ascii_only=True,
    ),
)  # fmt: skip
BY_NAME = {palette.name: palette for palette in PALETTES}


def luminance(colour: str) -> float:
    """Relative luminance of #rrggbb (WCAG 2.2, definition of relative luminance)."""
    parts = [int(colour[place : place + 2], 16) / 255 for place in (1, 3, 5)]
    red, green, blue = (part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in parts)
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def contrast(ink: str, paper: str) -> float:
    """Contrast ratio, 1 to 21 (WCAG 2.2, definition of contrast ratio)."""
    light, dark = sorted((luminance(ink), luminance(paper)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


def textual_theme(palette: Palette) -> Theme:
    """The palette as a Textual theme; the style sheet uses the `fb-...` variables only."""
    names = [name for name in Palette.__dataclass_fields__ if name not in ("name", "dark", "ascii_only")]
    variables = {f"fb-{name.replace('_', '-')}": getattr(palette, name) for name in names}
    return Theme(
        name=palette.name, primary=palette.accent, secondary=palette.accent, accent=palette.accent,
        foreground=palette.ink, background=palette.paper, surface=palette.paper, panel=palette.paper,
        success=palette.good, warning=palette.warn, error=palette.bad, dark=palette.dark, variables=variables,
    )  # fmt: skip
