"""The line between two reduced marks: what both share drops out of its uncertainty, what they do not stays."""

from __future__ import annotations

import dataclasses
import json
import math
from pathlib import Path

import numpy as np
import pytest
from recorded_samples import SAMPLES, record_into

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import UsageError
from fieldbook.occupy.between import _taped, inverse
from fieldbook.occupy.mark_results import mark_position
from fieldbook.reduce.between import halfwidths
from fieldbook.reduce.budget import Term, combine
from fieldbook.reduce.constants import GRS80
from fieldbook.reduce.geodesy import enu_difference, geocentric

from .shifted_log import shifted


@pytest.fixture(scope="module")
def two_marks(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """KR-07 (one occupation), and the same log once more as KR-08, 0.02 minutes (31 m) east of it and five hours later."""
    folder = tmp_path_factory.mktemp("two_marks")
    book = folder / "two.book"
    source = SAMPLES / "kestrel-ridge-1"
    record_into(book, source / "session.toml")
    text = (source / "session.toml").read_text(encoding="utf-8")
    other = folder / "other"
    other.mkdir()
    (other / "session.toml").write_text(text.replace('name = "KR-07"', 'name = "KR-08"'), encoding="utf-8")
    (other / "receiver.nmea").write_bytes(shifted((source / "receiver.nmea").read_bytes(), minutes=0.02, hours=5))
    record_into(book, other / "session.toml")
    return book


def test_common_lines_drop_out(two_marks: Path) -> None:
    with Book.open(two_marks, clock=SystemClock()) as book:
        found = inverse(book, "KR-07", "KR-08")
        one, two = mark_position(book, "KR-07"), mark_position(book, "KR-08")
    lines = {line.source: line for line in found.budget}
    gone = [source for source, line in lines.items() if line.common and not any(line.u_enu_m)]
    assert any(source.startswith("frame operation") for source in gone)
    assert any(source.startswith("phase centre") for source in gone)
    assert any(source.startswith("resolution of the received geoid separation") for source in gone)
    assert any("of station and antenna" in source for source in gone)
    plumb = next(line for source, line in lines.items() if source.startswith("plumb line"))
    own = next(line for line in one.uncertainty.budget if line.source.startswith("plumb line"))
    assert plumb.u_enu_m[0] == pytest.approx(math.sqrt(2) * (own.u_enu_m[0] or 0.0), rel=1e-9)
    # by hand: the lines that are not common, of both, each of the two the same log
    for axis in (0, 1, 2):
        parts = [
            line.u_enu_m[axis] or 0.0
            for end in (one, two)
            for line in end.uncertainty.budget
            if not line.common or line.source.startswith("plumb line")
        ]
        assert found.u_enu_m[axis] == pytest.approx(math.sqrt(sum(value**2 for value in parts)), rel=1e-6)
    assert found.distance95_m < one.uncertainty.horizontal95_m, "the frame operation alone states 30 mm"


def test_distances_are_those_of_the_coordinates(two_marks: Path) -> None:
    with Book.open(two_marks, clock=SystemClock()) as book:
        found = inverse(book, "KR-07", "KR-08")
        back = inverse(book, "KR-08", "KR-07")
        one, two = (mark_position(book, name).client for name in ("KR-07", "KR-08"))
    ends = [(item.lat_deg, item.lon_deg, item.h_m or 0.0) for item in (one, two)]
    east, north, up = enu_difference(ends[0], ends[1], GRS80)
    assert found.slope_m == pytest.approx(math.dist(geocentric(*ends[0]), geocentric(*ends[1])), abs=1e-9)
    assert found.slope_m == pytest.approx(float(np.linalg.norm([east, north, up])), abs=1e-9)
    assert found.azimuth_deg == pytest.approx(math.degrees(math.atan2(east, north)) % 360.0, abs=1e-4)
    assert found.height_difference_m == pytest.approx(ends[1][2] - ends[0][2], abs=1e-12)
    assert back.azimuth_deg == pytest.approx(found.reverse_azimuth_deg, abs=1e-9)
    assert back.height_difference_m == pytest.approx(-(found.height_difference_m or 0.0), abs=1e-12)
    assert found.grid is not None
    assert found.grid.factor == pytest.approx(found.grid.distance_m / (found.ground_m or 1.0))


def test_what_is_taped_is_compared() -> None:
    """4 mm off with u 2 mm and 5 mm (95 %) of the coordinates: limit 6.3 mm; a foot off is no scatter."""
    good = _taped((100.004, 0.002), 100.0, 0.005)
    bad = _taped((100.3048, 0.002), 100.0, 0.005)
    assert good is not None
    assert good.agrees
    assert good.limit_m == pytest.approx(math.hypot(0.005, 1.959964 * 0.002), rel=1e-6)
    assert bad is not None
    assert not bad.agrees
    assert bad.difference_m == pytest.approx(0.3048, abs=1e-9)
    with pytest.raises(UsageError, match="positive"):
        _taped((100.0, 0.0), 100.0, 0.005)
    with pytest.raises(UsageError, match="height"):
        _taped((100.0, 0.002), None, None)


def test_command(two_marks: Path, run_fieldbook) -> None:
    code, out, _ = run_fieldbook("marks", "inverse", two_marks, "KR-07", "KR-08", "--json")
    assert code == 0
    tree = json.loads(out)
    assert tree["schema"] == "fieldbook.inverse/1"
    from fieldbook.model.inverse import Inverse

    assert set(tree) == {"schema", "book", *(item.name for item in dataclasses.fields(Inverse))}
    code, out, _ = run_fieldbook("marks", "inverse", two_marks, "KR-07", "KR-08", "--taped", "99", "--taped-u", "0.002")
    assert code == 0
    assert "DOES NOT AGREE" in out
    assert "reverse azimuth" in out
    assert run_fieldbook("marks", "inverse", two_marks, "KR-07", "KR-07")[0] == 2
    assert run_fieldbook("marks", "inverse", two_marks, "KR-07", "KR-99")[0] == 2
    assert run_fieldbook("marks", "inverse", two_marks, "KR-07", "KR-08", "--taped", "99")[0] == 2


def test_halfwidths_by_hand() -> None:
    """u 3 mm east and 4 mm north, correlation 0.5, infinite dof: along 90 degrees 1.96 x 3 mm, across 1.96 x 4 mm over
    the distance; along 45 degrees sqrt((9 + 16)/2 + 6)."""
    combined = combine([Term("x", "B", "normal", (0.003, 0.004, 0.010), rho_en=0.5)])
    east = halfwidths(combined, 90.0, 1000.0, 1000.0, 0.0)
    assert east.distance_m == pytest.approx(1.959964 * 0.003, rel=1e-6)
    assert east.azimuth_arcsec == pytest.approx(1.959964 * 0.004 / 1000 * 206264.806, rel=1e-6)
    diagonal = halfwidths(combined, 45.0, 1000.0, 1000.0, 0.0)
    assert diagonal.distance_m == pytest.approx(1.959964 * 1e-3 * math.sqrt((9 + 16) / 2 + 6), rel=1e-6)
    steep = halfwidths(combined, 90.0, 600.0, 1000.0, 800.0)
    assert steep.slope_m == pytest.approx(1.959964 * math.hypot(0.6 * 0.003, 0.8 * 0.010), rel=1e-6)


def test_few_degrees_of_freedom_widen_as_the_region_does() -> None:
    """nu = 5: the ellipse is a bivariate t of 4 dof and scale 5/4 (region); one component of it is t of 4 dof: 2.776."""
    combined = combine([Term("x", "A", "t", (0.003, 0.003, 0.003), (5.0, 5.0, 5.0))])
    assert halfwidths(combined, 10.0, 100.0, None, None).distance_m == pytest.approx(
        2.776445 * math.sqrt(1.25) * 0.003, rel=1e-6
    )
    alone = halfwidths(combined, None, 0.0, None, None)
    assert alone.azimuth_arcsec is None
    assert alone.distance_m == pytest.approx(2.776445 * math.sqrt(1.25) * 0.003, rel=1e-6)
