"""The samples end to end: the truth lies inside the stated 95 %, what is wrong is set aside and named.

The truth is the simulator's, kept in truth.toml; it never reaches the program. One draw each: evidence that the line
is connected rightly, not of coverage (that is the coverage test's).
"""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from recorded_samples import SAMPLE_NAMES, truth_of

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.model.reduction import Reduction
from fieldbook.occupy.reductions import reduce_book
from fieldbook.reduce.geodesy import enu_difference
from fieldbook.reduce.region import f2_quantile


@pytest.fixture(scope="module")
def reductions(sample_books: dict[str, Path]) -> dict[str, Reduction]:
    found = {}
    for name, path in sample_books.items():
        with Book.open(path, clock=SystemClock()) as book:
            reduced, failed = reduce_book(book)
        assert failed == []
        for item in reduced:
            found[f"{name}-{item.reduction.occupation}"] = item.reduction
    return found


def error_enu_m(name: str, reduction: Reduction) -> tuple[float, float, float]:
    truth = truth_of(name)["receiver_frame"]
    mark = reduction.receiver
    assert mark.frame == truth["frame"]
    assert mark.epoch == pytest.approx(truth["epoch"], abs=1e-4)
    assert mark.h_m is not None
    east, north, up = enu_difference(
        (truth["lat_deg"], truth["lon_deg"], truth["h_m"]), (mark.lat_deg, mark.lon_deg, mark.h_m)
    )
    return float(east), float(north), float(up)


@pytest.mark.parametrize("name", SAMPLE_NAMES)
def test_truth_lies_inside_the_stated_95(name: str, reductions: dict[str, Reduction]) -> None:
    reduction = reductions[name]
    east, north, up = error_enu_m(name, reduction)
    stated = reduction.uncertainty
    print(
        f"{name}: plan {math.hypot(east, north):.4f} of {stated.horizontal95_m:.4f} m, "
        f"height {abs(up):.4f} of {stated.vertical95_m:.4f} m"
    )
    assert math.hypot(east, north) <= stated.horizontal95_m
    assert stated.vertical95_m is not None
    assert abs(up) <= stated.vertical95_m
    (ee, en), (_, nn) = stated.cov_en_m2
    nu = max(min(dof for dof in stated.dof_enu[:2] if dof is not None), 3.0)
    squared = (east**2 * nn - 2 * east * north * en + north**2 * ee) / (ee * nn - en**2) * (nu - 1) / nu
    assert squared <= 2 * f2_quantile(0.95, nu - 1), "inside the 95 % ellipse too"


@pytest.mark.parametrize("name", SAMPLE_NAMES)
def test_truth_in_the_clients_frame(name: str, reductions: dict[str, Reduction]) -> None:
    """The client's coordinates of the truth, made by the sample maker's own PROJ pipeline, agree with the gateway's."""
    truth, client = truth_of(name)["client_frame"], reductions[name].client
    assert client is not None
    assert client.h_m is not None
    own = error_enu_m(name, reductions[name])
    there = enu_difference(
        (truth["lat_deg"], truth["lon_deg"], truth["h_m"]), (client.lat_deg, client.lon_deg, client.h_m)
    )
    assert [float(value) for value in there] == pytest.approx(own, abs=2e-4), "the same error seen in both frames"


def test_the_wrong_initialisation_is_named(reductions: dict[str, Reduction]) -> None:
    reduction = reductions["saltpan-1"]
    wrong = next(item for item in truth_of("saltpan-1")["initialisation"] if item["wrong"])
    aside = [item for item in reduction.initialisations if not item.used]
    assert len(aside) == 1
    offset = aside[0].offset_enu_m
    assert offset is not None
    assert offset[2] is not None
    assert math.sqrt(sum((value or 0.0) ** 2 for value in offset)) == pytest.approx(wrong["wrong_by_m"], abs=0.03)
    finding = next(item for item in reduction.findings if item.code == "wrong_initialisation")
    assert finding.figures["initialisation"] == aside[0].number
    assert reduction.set_aside["initialisation"] == aside[0].kept


def test_midnight_is_crossed(reductions: dict[str, Reduction]) -> None:
    reduction = reductions["saltpan-1"]
    assert str(reduction.started).startswith("2027-04-18T23:")
    assert str(reduction.ended).startswith("2027-04-19T00:")


def test_the_autonomous_sample_is_metres(reductions: dict[str, Reduction]) -> None:
    stated = reductions["saltpan-2"].uncertainty
    assert stated.horizontal95_m > 1.0
    assert stated.vertical95_m is not None
    assert stated.vertical95_m > 1.0
    assert "autonomous" in [item.code for item in reductions["saltpan-2"].findings]


def test_good_to_leave_while_the_second_occupation_is_owed(sample_books: dict[str, Path], tmp_path: Path) -> None:
    """One occupation with both height readings: the tripod may come down, the mark still owes its second visit."""
    from recorded_samples import SAMPLES, record_into

    path = tmp_path / "one.book"
    record_into(path, SAMPLES / "kestrel-ridge-1" / "session.toml")
    with Book.open(path, clock=SystemClock()) as book:
        (item,), _ = reduce_book(book)
    leave = item.reduction.leave
    assert leave is not None
    assert leave.verdict == "good to leave"
    owed = {line.line: line for line in leave.lines if line.scope == "mark"}
    assert not owed["occupations"].met
    assert "come back from 05:30 UTC" in owed["hours_between"].text


def test_arp_height_of_the_contract(reductions: dict[str, Reduction]) -> None:
    """contract.md section 2: slant 1.5320 m, radius 0.1500 m, 0.0300 m above the ARP give 1.49464 m."""
    reading = reductions["kestrel-ridge-1"].antenna.readings[0]
    assert (reading.value, reading.unit, reading.method) == ("1.5320", "m", "slant")
    assert reading.arp_m == pytest.approx(1.49464, abs=5e-6)


def test_every_heard_epoch_has_one_fate(reductions: dict[str, Reduction]) -> None:
    for reduction in reductions.values():
        assert reduction.heard == reduction.kept + sum(reduction.set_aside.values())
