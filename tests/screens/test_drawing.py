"""Canvas, plan, digits, plain text, themes and words: pure parts of the screens."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from fieldbook.model.reduction import Convergence
from fieldbook.model.session import Antenna
from fieldbook.screens.canvas import Canvas, ellipse_points, nice_length
from fieldbook.screens.digits import big
from fieldbook.screens.heights import drawing
from fieldbook.screens.plain import clean, fit, pad, to_ascii, width_of, wrapped
from fieldbook.screens.plots import plan_half_width_m, plan_rows, sky_rows, trace_rows
from fieldbook.screens.rows import STYLES, cropped, row, row_width
from fieldbook.screens.settling import settling_rows
from fieldbook.screens.themes import PALETTES, contrast, luminance
from fieldbook.screens.words import duration, length_95, quality_word, stopwatch
from fieldbook.settings.schema import METHODS

from .fakes import CONVERGENCE, HOSTILE, SKY, FakeBridge, trace


def dots_of(rows: list[tuple[tuple[str, str], ...]]) -> np.ndarray:
    """The dots of a drawing, read back from its braille characters."""
    lines = []
    for line in rows:
        text = "".join(part for part, _ in line)
        cells = [ord(letter) - 0x2800 if 0x2800 <= ord(letter) <= 0x28FF else 0 for letter in text]
        for bits in ((0x01, 0x08), (0x02, 0x10), (0x04, 0x20), (0x40, 0x80)):
            lines.append([bool(cell & bit) for cell in cells for bit in bits])
    return np.array(lines)


def test_every_dot_lands_where_it_was_put() -> None:
    rng = np.random.default_rng(5)
    canvas = Canvas(9, 5)
    x, y = rng.integers(0, 18, 60), rng.integers(0, 20, 60)
    canvas.dots(x.astype(float), y.astype(float), "text")
    expected = np.zeros((20, 18), dtype=bool)
    expected[y, x] = True
    assert (dots_of(canvas.rows_of_spans(("text",))) == expected).all()


def test_points_outside_are_counted_never_wrapped() -> None:
    canvas = Canvas(4, 2)
    canvas.dots(np.array([-1.0, 8.0, 3.0]), np.array([0.0, 0.0, 99.0]), "text")
    assert canvas.outside == 3
    assert not dots_of(canvas.rows_of_spans(("text",))).any()


def test_circle_is_as_wide_as_high() -> None:
    """1:1: a cell is 2 x 4 dots and twice as high as wide, so dots are square."""
    canvas = Canvas(20, 10)
    east, north = ellipse_points(15.0, 15.0, 0.0)
    canvas.dots(20 + east, 20 - north, "text")
    line, column = np.nonzero(dots_of(canvas.rows_of_spans(("text",))))
    assert np.ptp(line) == np.ptp(column) == 30


@pytest.mark.parametrize("azimuth", [0.0, 30.0, 51.0, 90.0, 135.0, 179.0])
def test_ellipse_points_along_its_azimuth(azimuth: float) -> None:
    east, north = ellipse_points(3.0, 1.0, azimuth, 720)
    far = int(np.argmax(np.hypot(east, north)))
    assert math.hypot(east[far], north[far]) == pytest.approx(3.0)
    assert math.degrees(math.atan2(east[far], north[far])) % 180.0 == pytest.approx(azimuth % 180.0, abs=0.5)
    assert float(np.hypot(east, north).min()) == pytest.approx(1.0, abs=1e-4)


def test_plan_keeps_one_scale_and_orientation() -> None:
    """The simulated cloud lies along azimuth 51 degrees; the dots of the plan must too (atan of its principal axis)."""
    bridge = FakeBridge(recording=True)
    view = bridge.snapshot()
    assert view.trace is not None
    view.trace.initialisation = [1] * len(view.trace.initialisation)
    assert view.reduction is not None
    view.reduction.uncertainty_client = view.reduction.uncertainty = None  # type: ignore[assignment]
    object.__setattr__(view, "reduction", None)
    line, column = np.nonzero(dots_of(plan_rows(view, 60, 32)[:-2]))
    spread = np.cov(np.vstack([column, -line]))
    _, axes = np.linalg.eigh(spread)
    azimuth = math.degrees(math.atan2(axes[0, 1], axes[1, 1])) % 180.0
    assert azimuth == pytest.approx(51.0, abs=6.0)


def test_plan_shows_set_aside_and_second_initialisation_by_shape() -> None:
    view = FakeBridge(recording=True).snapshot()
    text = "\n".join("".join(part for part, _ in line) for line in plan_rows(view, 44, 22))
    assert "×" in text
    assert "○" in text
    assert "├" in text
    styles = {style for line in plan_rows(view, 44, 22) for _, style in line}
    assert {"accent", "warn"} <= styles <= set(STYLES)


def test_plan_holds_the_whole_ellipse() -> None:
    fixes = trace()
    from fieldbook.model.reduction import Ellipse95

    assert plan_half_width_m(fixes, Ellipse95(0.5, 0.2, 10.0)) > 0.5
    assert plan_half_width_m(fixes, None) < 0.05


def test_sky_north_is_up_and_east_right() -> None:
    from fieldbook.model.epoch import Satellite

    sky = [Satellite("GPS", 1, 20, 0, 40.0, True), Satellite("Galileo", 2, 20, 90, 40.0, False)]
    lines = ["".join(part for part, _ in line) for line in sky_rows(sky, 40, 21)]
    north = [n for n, line in enumerate(lines[:-1]) if "G" in line]
    east = [(n, line.index("e")) for n, line in enumerate(lines[:-1]) if "e" in line]
    assert len(north) == len(east) == 1
    assert north[0] < 5
    assert 8 <= east[0][0] <= 11
    assert east[0][1] > 28
    assert "1 used of 2" in lines[-1]


def test_height_trace_keeps_what_was_set_aside_in_sight() -> None:
    rows = trace_rows(trace(), 60, 8)
    text = "\n".join("".join(part for part, _ in line) for line in rows)
    assert "×" in text
    assert all(row_width(line) <= 60 for line in rows)


def test_nothing_to_draw_draws_nothing() -> None:
    bridge = FakeBridge(recording=True)
    bridge.trace = None
    assert any("no fixes yet" in text for line in plan_rows(bridge.snapshot(), 20, 10) for text, _ in line)
    assert trace_rows(None, 40, 5)
    assert sky_rows([], 20, 10)
    assert SKY


@pytest.mark.parametrize(
    ("limit", "nice"), [(1.0, 1.0), (1.9, 1.0), (2.0, 2.0), (0.049, 0.02), (7.0, 5.0), (0.001, 0.001)]
)
def test_scale_bar_is_one_two_or_five(limit: float, nice: float) -> None:
    assert nice_length(limit) == pytest.approx(nice)


def test_big_digits_fit_and_tell_mm_from_m() -> None:
    for text in ("NOT YET", "17 mm", "14:02", "DONE", "NO DATA"):
        lines = big(text, 76, 6)
        assert len(lines) >= 5
        assert max(len(line) for line in lines) <= 76
    assert big("17 mm", 76, 6)[0][30:].strip() == ""  # a small m does not reach the upper rows
    assert big("X", 1, 1) == ["X"]


@pytest.mark.parametrize("text", HOSTILE.values(), ids=HOSTILE.keys())
@pytest.mark.parametrize("width", [1, 2, 7, 40])
def test_text_is_cleaned_and_counted_in_cells(text: str, width: int) -> None:
    assert clean(text).isprintable()
    assert width_of(fit(text, width)) <= width
    assert width_of(pad(text, width)) == width
    assert all(width_of(line) <= max(4, width) for line in wrapped(text, width))
    assert row_width(cropped(row(clean(text), (clean(text), "bad")), width)) == width


@pytest.mark.parametrize("method", METHODS)
def test_every_method_has_its_drawing_with_the_figures(method: str) -> None:
    antenna = Antenna("DEMO-A1 NONE", slant_radius_m=0.15, slant_mark_above_arp_m=0.03, arp_above_mount_m=0.0123)
    rows = drawing(method, "1.4900 m", 1.5023, antenna)
    text = "\n".join("".join(part for part, _ in line) for line in rows)
    assert len(rows) == 13
    assert all(row_width(line) <= 38 for line in rows)
    assert "1.4900 m" in text
    assert "1.5023 m" in text
    assert ("0.0123 m" in text) == (method in ("mount", "rod"))
    bare = drawing(method, "", None, None)
    assert len(bare) == 13


def test_wrapped_says_when_there_is_more() -> None:
    lines = wrapped("one two three four five six", 10, 2)
    assert len(lines) == 2
    assert lines[-1].endswith("…")


def test_ascii_is_ascii() -> None:
    assert to_ascii("─│╲●▶ 23°40′12″ √ 測").isascii()


@pytest.mark.parametrize("palette", PALETTES, ids=lambda p: p.name)
def test_every_ink_is_legible(palette: object) -> None:
    """WCAG 2.2, 1.4.3 (4.5:1) for all, 1.4.6 (7:1) for noon: read in the sun."""
    least = 7.0 if palette.name == "noon" else 4.5  # type: ignore[attr-defined]
    for what, ink, paper in palette.pairs():  # type: ignore[attr-defined]
        assert contrast(ink, paper) >= least, what


def test_contrast_of_known_pairs() -> None:
    """Black on white is 21:1 (WCAG 2.2, note to contrast ratio); #777777 on white 4.48:1 (from memory)."""
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0)
    assert contrast("#777777", "#ffffff") == pytest.approx(4.48, abs=0.005)
    assert [luminance(colour) for colour in ("#000000", "#ffffff")] == pytest.approx([0.0, 1.0])


def test_quality_words_are_those_of_nmea_0183() -> None:
    """NMEA 0183 GGA field 6, from memory of edition 4.x."""
    assert [quality_word(n) for n in range(9)] == [
        "no fix",
        "autonomous",
        "differential",
        "PPS",
        "RTK fixed",
        "RTK float",
        "dead reckoning",
        "manual",
        "simulator",
    ]


def test_lengths_round_up_and_durations_read_aloud() -> None:
    assert [length_95(x) for x in (0.0062, 0.0165, 0.0171, 0.24, 3.02, None)] == [
        "6.2 mm",
        "17 mm",
        "18 mm",
        "0.24 m",
        "3.1 m",
        "not known",
    ]
    assert [duration(s) for s in (0, 58, 842, 7500, None)] == ["0 s", "58 s", "14 min 2 s", "2 h 5 min", "not known"]
    assert stopwatch(842) == "14:02"
    assert stopwatch(3753) == "1:02:33"
    # a stated 95 % never shrinks by printing, whatever the unit changes to
    for step in range(1, 4000):
        value_m = step * 2.7e-4
        text, unit = length_95(value_m).split()
        assert float(text) * (0.001 if unit == "mm" else 1.0) >= value_m * (1 - 0.006)


def test_a_combined_document_names_its_occupations() -> None:
    from fieldbook.screens.diary_text import occupations_of

    assert occupations_of({"occupation": 2}) == "occupation 2"
    assert occupations_of({"occupation": None, "occupations": [1, 2]}) == "occupations 1, 2"


def settling(width: int = 80, height: int = 14, **changes: object) -> list[tuple[tuple[str, str], ...]]:
    bridge = FakeBridge(recording=True)
    bridge.wants_running = True
    return settling_rows(replace(bridge.snapshot(), **changes), width, height)


def dots_in(rows: list[tuple[tuple[str, str], ...]], style: str, columns: slice) -> list[int]:
    """First row of dots of that style in each of the columns of cells, -1 where there is none."""
    cells: list[list[tuple[str, str]]] = [[(letter, name) for text, name in line for letter in text] for line in rows]
    found = []
    for column in range(columns.start, columns.stop):
        hit = [line for line, cell in enumerate(cells) if column < len(cell) and cell[column][1] == style]
        found.append(hit[0] if hit else -1)
    return found


def test_the_band_narrows_and_the_mean_comes_to_rest_inside_it() -> None:
    rows = settling()
    text = ["".join(part for part, _ in line) for line in rows]
    assert text[0].startswith(" RUNNING MEAN  inside the wanted figures since 08:09 UTC")
    assert "plan, wanted 20 mm" in text[1]
    assert "height, wanted 40 mm" in text[1]
    assert len(rows) == 14
    drawing = rows[2:-1]
    circle = [line for line in dots_in(drawing, "accent", slice(8, 38)) if line >= 0]
    assert circle == sorted(circle), "the circle comes down from the top, never up again"
    assert circle[0] == 0
    assert circle[-1] > circle[0]
    assert text[2].startswith("  60 mm"), "three times the wanted figure is the most that is drawn"


def test_without_a_running_mean_the_figure_says_so() -> None:
    assert "not yet" in "".join(part for part, _ in settling(convergence=None)[1])
    one = Convergence([60.0], [0.0], [0.0], [None], [0.03], [None])
    assert "not yet" in "".join(part for part, _ in settling(convergence=one)[1])
    flat = replace(CONVERGENCE, up_m=[None] * 14, vertical95_m=[None] * 14)
    assert any("not known" in part for line in settling(convergence=flat) for part, _ in line), "no height, no strip"
    assert settling(height=5) == [], "no room for a figure"
