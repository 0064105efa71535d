"""Is it the right mark: distances and inscriptions made by hand. One minute of latitude is 1 852 m to 0.5 %, so 0.0001 degree
is 11.1 m; limits are common practice, no source.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from test_leave import reduction

from fieldbook.check.identity import identity_findings, same_inscription, was_read
from fieldbook.model.reduction import Finding, Geodetic
from fieldbook.model.session import Session
from fieldbook.settings.session import load_session

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
METRE_DEG = 1 / 110_922.0  # of latitude at 34 degrees south, GRS 80


@pytest.fixture
def session() -> Session:
    return load_session(SAMPLE)


def at(name: str, north_m: float, **more: Any) -> dict[str, Any]:
    """A mark described so many metres north of the antenna at 34 S, 146 E."""
    return {"name": name, "approximate": {"lat_deg": f"{-34.0 + north_m * METRE_DEG:.8f}", "lon_deg": "146.0"}, **more}


def found(session: Session, *marks: dict[str, Any], horizontal_m: float = 0.015) -> list[Finding]:
    made = replace(reduction(horizontal_m), receiver=Geodetic("EPSG:7912", "ITRF2014", 2027.17, -34.0, 146.0, 200.0))
    return list(identity_findings(session, made, {tree["name"]: tree for tree in marks}))


@pytest.mark.parametrize(
    ("away_m", "codes"), [(0.0, []), (19.8, []), (20.2, ["far_from_mark"]), (31.0, ["far_from_mark"])]
)
def test_far_from_the_mark_that_was_named(session: Session, away_m: float, codes: list[str]) -> None:
    findings = found(session, at("KR-07", away_m))
    assert [item.code for item in findings] == codes
    if away_m == 31.0:
        assert findings[0].text.startswith("You are 31 m from the mark you named")
        assert findings[0].severity == "caution"
        assert findings[0].figures["distance_m"] == pytest.approx(31.0, abs=0.05)


def test_a_wide_position_is_not_far_from_anything_near(session: Session) -> None:
    assert found(session, at("KR-07", 31.0), horizontal_m=12.0) == []


def test_at_another_mark_is_a_stop(session: Session) -> None:
    (finding,) = found(session, at("KR-07", 31.0), at("KR-08", 0.8), at("KR-09", -2.0))
    assert (finding.code, finding.severity) == ("at_another_mark", "stop")
    assert "0.8 m from KR-08 and 31 m from KR-07" in finding.text
    assert found(session, at("KR-07", 3.0), at("KR-08", 0.8)) == [], "two marks of one witness group"
    (far,) = found(session, at("KR-07", 31.0), at("KR-08", 6.0))
    assert far.code == "far_from_mark"


def test_without_an_approximate_position_nothing_is_said(session: Session) -> None:
    assert found(session, {"name": "KR-07"}, at("KR-08", 0.5)) == []


def test_the_sessions_own_position_serves_where_the_book_has_none(session: Session) -> None:
    mark = replace(session.mark, approximate_lat_deg=-34.0 + 50 * METRE_DEG, approximate_lon_deg=146.0)
    assert [item.code for item in found(replace(session, mark=mark))] == ["far_from_mark"]


@pytest.mark.parametrize(
    ("read", "code"),
    [
        ("kr07/1998", None),
        ("KR\u200707 1998", None),
        ("KR 08 1998", "inscription_differs"),
        ("KR 07", "inscription_differs"),
        ("not readable because of rust", "inscription_not_read"),
        ("Not found under the snow", "inscription_not_read"),
    ],
)
def test_the_metal_against_the_description(session: Session, read: str, code: str | None) -> None:
    changed = replace(session, setup=replace(session.setup, inscription_read=read))
    codes = [item.code for item in found(changed, at("KR-07", 0.0, inscription="KR 07 1998"))]
    assert codes == ([] if code is None else [code])


def test_an_inscription_that_nobody_described_is_kept_and_not_judged(session: Session) -> None:
    changed = replace(session, setup=replace(session.setup, inscription_read="KR 07 1998"))
    assert found(changed, at("KR-07", 0.0)) == []


def test_letters_and_digits_count() -> None:
    assert same_inscription("\uff2b\uff32-07", "kr 07")
    assert not same_inscription("KR-O7", "KR-07")
    assert was_read("KR 07")
    assert not was_read("not seen: under water")
    assert not was_read(None)
