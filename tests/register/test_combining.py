"""Combining across books and parties: against least squares written out here, against the same book combined by itself.

No published worked example of a weighted mean with covariances stands among the project's check values; the reference of this
file is a stacked 3n x 3n solution that shares no line with the program but the kept evidence. Peelle's puzzle and GUM H.2, which
the engine under this is held against, are in tests/reduce/test_combine.py.
"""

from __future__ import annotations

import math
from collections import defaultdict
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from fieldbook.clock import SystemClock
from fieldbook.errors import UsageError
from fieldbook.reduce.geodesy import enu_difference
from fieldbook.register import decisions
from fieldbook.register.classes import Figures, OfficeClass, fgdc_class, load_classes, office_class
from fieldbook.register.combining import (
    LEAST_SQUARES,
    MEDIAN,
    WIDENED,
    MarkValue,
    between_marks,
    combine_register,
    weighted_median,
)
from fieldbook.register.evidence import Evidence
from fieldbook.register.network import local_accuracies
from fieldbook.register.store import Register

from .conftest import Call
from .made import OFFICE, add, occupied

WHO = {"by": OFFICE, "reason": "seen on site"}


def one_mark(register: Register, evidence: list[Evidence]) -> MarkValue:
    """Each occupation in a book of its own, all joined to one mark, combined."""
    for number, item in enumerate(evidence):
        add(register, number, [item])
        if number:
            decisions.decide_same(register, "1", str(number + 1), **WHO)
    (value,) = combine_register(register)
    return value


def codes(value: MarkValue) -> list[str]:
    return [item.code for item in value.findings]


# -- the independent solution ----------------------------------------------------------------------------------


def _name(line: Any, evidence: Evidence, stations: bool, serials: bool, receivers: bool) -> list[tuple[str, float]]:
    """(what is shared, factor) of a common line: the rules of the docstring of reduce.shared, written out again."""
    shares = evidence.shares
    if line.source.startswith("least uncertainty claimed"):
        half = 1 / math.sqrt(2)
        serial = shares.antenna_serial if serials else "?"
        return [
            (f"floor at {shares.station if stations else '?'}", half),
            (f"floor with {shares.antenna} {serial}", half),
        ]
    if line.source.startswith("resolution of the received geoid separation"):
        return [(f"digits of {shares.receiver_serial if receivers else '?'}", 1.0)]
    if line.source.startswith("phase centre"):
        return [(f"type {shares.antenna} {line.source}", 1.0)]
    return [(line.source, 1.0)]


def stacked(evidence: list[Evidence]) -> tuple[np.ndarray, np.ndarray]:
    """(mean, 3 x 3 covariance), east north up about the first, by one 3n x 3n solution."""
    n = len(evidence)
    places = [(e.place.lat_deg, e.place.lon_deg, e.place.h_m) for e in evidence]
    y = np.concatenate([enu_difference(places[0], place) for place in places])
    stations = all(e.shares.station for e in evidence)
    serials = all(e.shares.antenna_serial for e in evidence)
    receivers = all(e.shares.receiver_serial for e in evidence)
    weight, stated = np.zeros((3 * n, 3 * n)), np.zeros((3 * n, 3 * n))
    shared: dict[str, dict[int, np.ndarray]] = defaultdict(dict)
    for i, e in enumerate(evidence):
        block = slice(3 * i, 3 * i + 3)
        weight[block, block] += np.diag(np.square(e.prior_u_enu_m))
        u = np.array(e.mean.u_enu_m)
        a = np.diag(u**2)
        a[0, 1] = a[1, 0] = e.mean.rho_en * u[0] * u[1]
        stated[block, block] += a
        for line in e.budget:
            if line.type == "A":
                continue
            v = np.array(line.u_enu_m, dtype=float)
            if not line.common:
                weight[block, block] += np.diag(v**2)
                stated[block, block] += np.diag(v**2)
                continue
            for name, factor in _name(line, e, stations, serials, receivers):
                shared[name][i] = factor * v
    for parts in shared.values():
        for i, u in parts.items():
            for j, v in parts.items():
                cross = np.diag(np.minimum(u, v) ** 2)
                weight[3 * i : 3 * i + 3, 3 * j : 3 * j + 3] += cross
                stated[3 * i : 3 * i + 3, 3 * j : 3 * j + 3] += cross
    design = np.tile(np.eye(3), (n, 1))
    gain = np.linalg.solve(design.T @ np.linalg.solve(weight, design), np.linalg.solve(weight, design).T)
    return gain @ y, gain @ stated @ gain.T


VARIANTS = [
    {},
    {"station": "0043"},
    {"station": None, "antenna_serial": "0002"},
    {"antenna_serial": None, "receiver": "X"},
    {"receiver": None, "station": "0044", "antenna_serial": "0007"},
]


@pytest.mark.parametrize("seed", range(6))
def test_least_squares_written_out_here_agrees_to_a_nanometre(register: Register, base: Evidence, seed: int) -> None:
    rng = np.random.default_rng(seed)
    evidence = []
    for number in range(int(rng.integers(2, 6))):
        scale = float(rng.uniform(0.6, 2.0))
        mean = replace(
            base.mean, u_enu_m=tuple(scale * u for u in base.mean.u_enu_m), rho_en=float(rng.uniform(-0.6, 0.6))
        )
        prior = tuple(float(rng.uniform(0.5, 2.0)) * u for u in base.prior_u_enu_m)
        evidence.append(
            occupied(
                base,
                enu_m=tuple(rng.normal(0, 0.003, 3)),
                hours=30.0 * number,
                mean=mean,
                prior_u_enu_m=prior,
                **VARIANTS[int(rng.integers(0, len(VARIANTS)))],
            )
        )
    value = one_mark(register, evidence)
    assert value.method == LEAST_SQUARES
    expected, covariance = stacked(evidence)
    first = evidence[0].place
    start = (first.lat_deg, first.lon_deg, first.h_m)
    got = [-residual for residual in value.shares[0].residual_enu_m]
    assert got == pytest.approx(expected, abs=1e-9)
    # as latitude, longitude and height the same; a geocentric coordinate in double precision has steps of 0.9 nm
    place = enu_difference(start, (value.place.lat_deg, value.place.lon_deg, value.place.h_m))
    assert place == pytest.approx(expected, abs=5e-9)
    assert value.datum.u_enu_m == pytest.approx(np.sqrt(np.diag(covariance)), rel=1e-9)
    assert value.datum.cov_en_m2[0][1] == pytest.approx(covariance[0, 1], rel=1e-9, abs=1e-15)


def test_one_book_gives_what_the_book_gives_by_itself(
    sample_books: dict[str, Path], tmp_path: Path, run_fieldbook: Call
) -> None:
    path = tmp_path / "office.register"
    assert run_fieldbook("register", "add", path, *sample_books.values(), "--by", OFFICE).code == 0
    with Register.open(path, clock=SystemClock()) as register:
        values = {value.mark.name: value for value in combine_register(register)}
    for book in sample_books.values():
        for mark in run_fieldbook("reduce", book, "--json").json["marks"]:
            value = values[mark["mark"]]
            if mark["not_combined"]:
                # observed in another frame: alone in the book, here by full covariance, with next to no weight
                assert [item["code"] for item in mark["not_combined"]] == ["receiver_frame_differs"]
                assert value.shares[1].weight_enu[0] < 1e-4
                continue
            assert value.method == LEAST_SQUARES
            xyz = [mark["client"][key] for key in ("x_m", "y_m", "z_m")]
            assert value.place.xyz_m == pytest.approx(xyz, abs=1e-9)
            assert value.datum.u_enu_m == pytest.approx(mark["uncertainty_client"]["u_enu_m"], rel=1e-9)
            stated = mark["uncertainty_client"]["horizontal95_m"]
            assert value.datum.horizontal95_m == pytest.approx(stated, rel=1e-6)
            assert value.height.orthometric_m == pytest.approx(mark["height"]["orthometric_m"], abs=1e-5)
            assert [r.agrees for r in value.repeats] == [r["agrees"] for r in mark["repeats"]]


def test_what_is_common_is_not_averaged_away(register: Register, base: Evidence) -> None:
    """Ten books with one station and antenna: the common lines stay to the full, only the others shrink."""
    value = one_mark(register, [occupied(base, hours=30.0 * n) for n in range(10)])
    common = {line.source: line.u_enu_m for line in value.datum.budget if line.common}
    before = {line.source: line.u_enu_m for line in base.budget if line.common}
    assert common.keys() == before.keys()
    for source, u in before.items():
        assert common[source] == pytest.approx(u, rel=1e-9), source
    own = sum(line.u_enu_m[0] ** 2 for line in value.datum.budget if not line.common)
    assert own == pytest.approx(sum(line.u_enu_m[0] ** 2 for line in base.budget if not line.common) / 10, rel=1e-9)
    # of two parties with everything of their own the floor shrinks, the frame operation does not
    assert value.cov_common_m2 is not None
    assert np.linalg.eigvalsh(np.array(value.cov_common_m2)).min() >= -1e-18


def test_another_party_with_its_own_station_and_antenna_helps_more(tmp_path: Path, base: Evidence) -> None:
    from .made import new_register

    wide = []
    for number, change in enumerate(({}, {"station": "0099", "antenna_serial": "0042"})):
        with new_register(tmp_path / f"{number}.register") as register:
            value = one_mark(register, [occupied(base), occupied(base, hours=30.0, **change)])
            wide.append(value.datum.u_enu_m[0])
    assert wide[1] < wide[0]


def test_of_three_the_odd_one_is_named_and_does_not_pull(register: Register, base: Evidence) -> None:
    places = [(0.0, 0.0, 0.0), (0.002, -0.001, 0.004), (0.12, 0.05, 0.0)]
    value = one_mark(register, [occupied(base, enu_m=e, hours=30.0 * n) for n, e in enumerate(places)])
    assert value.odd_one == value.labels[2]
    assert value.method == MEDIAN
    assert "occupations_disagree" in codes(value)
    start = (base.place.lat_deg, base.place.lon_deg, base.place.h_m)
    east, _, _ = enu_difference(start, (value.place.lat_deg, value.place.lon_deg, value.place.h_m))
    assert abs(east) <= 0.003
    decisions.decide_exclude(register, value.odd_one, **WHO)
    (after,) = combine_register(register)
    assert after.method == LEAST_SQUARES
    assert [item.code for item in after.apart] == ["excluded"]
    assert after.datum.u_enu_m[0] < value.datum.u_enu_m[0]


def test_two_that_disagree_are_widened_and_nobody_is_blamed(register: Register, base: Evidence) -> None:
    value = one_mark(register, [occupied(base), occupied(base, enu_m=(0.0, 0.2, 0.0), hours=30.0)])
    assert (value.method, value.odd_one) == (WIDENED, None)
    (line,) = [line for line in value.datum.budget if line.source == "occupations that disagree"]
    assert line.u_enu_m[1] == pytest.approx(0.1 / math.sqrt(3), rel=1e-3)


def test_false_alarms_of_sound_occupations_stay_at_the_level(base: Evidence) -> None:
    """Simulated: common errors drawn as common, own ones as own; t and F on effective degrees of freedom at 5 %."""
    from fieldbook.check.repeats import compare
    from fieldbook.register.fold import Held
    from fieldbook.register.members import Member, circumstances, inputs_of, requirement_of

    rng = np.random.default_rng(11)
    held = Held("b", 1, 1, "M", "", "", False, None, None, None, None, None, 0.0, None, (0.0, None), (), None)
    items = [
        replace(occupied(base, hours=30.0 * n), sigma_plan_m=9.0, sigma_height_m=9.0, measured_u95_m=(9.0, 9.0))
        for n in range(4)
    ]
    members = [Member(held, item, item.place, item.budget) for item in items]
    alarms, rounds = 0, 200
    inputs = inputs_of(members)
    for _ in range(rounds):
        drawn = []
        for item in inputs:
            own = [item.mean, *item.own]
            enu = tuple(float(sum(rng.normal(0, t.u_enu_m[a] or 0.0) for t in own)) for a in range(3))
            drawn.append(replace(item, enu_m=enu))
        judged = compare(drawn, circumstances(members), requirement_of(members))
        alarms += not all(item.agrees for item in judged.repeats)
    assert alarms / rounds <= 0.05 + 2 * math.sqrt(0.05 * 0.95 / rounds)


# -- frames, copies, overlaps ----------------------------------------------------------------------------------


def in_gda94(item: Evidence) -> Evidence:
    """The same place given in GDA94 (EPSG:4939), by the published parameters through the gateway."""
    from fieldbook.model.session import FrameChoice
    from fieldbook.reduce.frames import transform_to_client

    place = item.place
    client, _ = transform_to_client(
        FrameChoice(receiver=place.frame, client="EPSG:4939"), place.lat_deg, place.lon_deg, place.h_m, 2027.17
    )
    moved = replace(
        place, frame=client.frame, frame_name=client.frame_name, lat_deg=client.lat_deg, lon_deg=client.lon_deg,
        h_m=client.h_m, xyz_m=(client.x_m, client.y_m, client.z_m),
    )  # fmt: skip
    return replace(item, place=moved)


def test_frames_are_never_mixed(register: Register, base: Evidence) -> None:
    evidence = [occupied(base), occupied(base, hours=30.0), in_gda94(occupied(base, hours=60.0))]
    value = one_mark(register, evidence)
    assert [item.code for item in value.apart] == ["frame_differs"]
    assert len(value.members) == 2
    decisions.decide_frame(register, "EPSG:7843", None, **WHO)
    (value,) = combine_register(register)
    assert len(value.members) == 3
    assert value.shares[2].transformed == ("EPSG:8048",)
    assert value.method == LEAST_SQUARES  # it came back to a nanometre
    assert any("8048" in line.source for line in value.datum.budget)


def test_moving_frames_at_two_epochs_are_set_apart(register: Register, base: Evidence) -> None:
    places = [replace(base.place, frame="EPSG:7912", frame_name="ITRF2014", epoch=epoch) for epoch in (2020.0, 2027.17)]
    evidence = [replace(occupied(base, hours=30.0 * n), place=place) for n, place in enumerate(places)]
    value = one_mark(register, evidence)
    assert [item.code for item in value.apart] == ["frame_differs"]
    decisions.decide_frame(register, "EPSG:7912", "2020.0", **WHO)
    (value,) = combine_register(register)
    assert [item.code for item in value.apart] == ["motion_unknown"]
    assert len(value.members) == 1


def test_one_log_in_two_books_counts_once(register: Register, base: Evidence) -> None:
    one = occupied(base)
    value = one_mark(register, [one, replace(one, occupation=3)])
    assert [item.code for item in value.apart] == ["same_bytes"]
    assert len(value.members) == 1


def test_two_at_once_on_one_mark_stop_it(register: Register, base: Evidence) -> None:
    value = one_mark(register, [occupied(base), occupied(base, hours=0.1)])
    assert "overlap" in codes(value)


def test_open_and_simulated_ones_take_no_part(register: Register, base: Evidence) -> None:
    value = one_mark(register, [occupied(base, open=True), occupied(base, hours=30.0, simulated=True)])
    assert sorted(item.code for item in value.apart) == ["open", "simulated"]
    assert value.place is None
    assert "no_coordinate" in codes(value)


def test_independence_is_graded_across_books(register: Register, base: Evidence) -> None:
    value = one_mark(register, [occupied(base), occupied(base, hours=30.0, arp_m=(base.antenna_height_m or 0) + 0.1)])
    assert value.independence == "independent"
    assert "occupations_not_independent" not in codes(value)


# -- two accuracies --------------------------------------------------------------------------------------------


def test_between_marks_what_both_share_drops_out(register: Register, base: Evidence) -> None:
    add(register, 0, [occupied(base, mark="A")])
    add(register, 1, [occupied(base, mark="B", enu_m=(900.0, 0.0, 0.0), hours=3.0)])
    one, two = combine_register(register)
    line = between_marks(one, two)
    own = [item for item in base.budget if not item.common or item.source.startswith("plumb line")]
    expected = math.sqrt(2 * sum((item.u_enu_m[0] or 0.0) ** 2 for item in own))
    assert line.u_enu_m[0] == pytest.approx(expected, rel=1e-9)
    assert line.horizontal95_m < one.datum.horizontal95_m  # the frame operation alone is 3 cm here
    local = local_accuracies([one, two])
    assert local[1].horizontal_worst_m == local[1].horizontal_mean_m == line.horizontal95_m


def test_what_is_not_stated_does_not_drop_out_between_marks(register: Register, base: Evidence) -> None:
    unknown = {"station": None, "antenna_serial": None, "receiver": None}
    add(register, 0, [occupied(base, mark="A", **unknown)])
    add(register, 1, [occupied(base, mark="B", enu_m=(900.0, 0.0, 0.0), hours=3.0, **unknown)])
    add(register, 2, [occupied(base, mark="C", enu_m=(0.0, 900.0, 0.0), hours=6.0)])
    add(register, 3, [occupied(base, mark="D", enu_m=(900.0, 900.0, 0.0), hours=9.0)])
    a, b, c, d = combine_register(register)
    unknown_line, stated = between_marks(a, b), between_marks(c, d)
    assert unknown_line.u_enu_m[2] > stated.u_enu_m[2]
    assert all(len(item.lines) == 3 for item in local_accuracies([a, b, c, d]).values())


def test_no_line_between_frames(register: Register, base: Evidence) -> None:
    add(register, 0, [occupied(base, mark="A")])
    add(register, 1, [in_gda94(occupied(base, mark="B", enu_m=(900.0, 0.0, 0.0), hours=3.0))])
    one, two = combine_register(register)
    assert between_marks(one, two) is None


# -- classes and small parts -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("value", "name"),
    [
        (0.0009, "1 millimetre"),
        (0.01, "1 centimetre"),
        (0.0101, "2 centimetre"),
        (0.3, "5 decimetre"),
        (10.0, "10 metre"),
        (11.0, "over 10 metre"),
        (None, None),
    ],
)
def test_fgdc_ranges(value: float | None, name: str | None) -> None:
    assert fgdc_class(value) == name


def test_office_classes(tmp_path: Path) -> None:
    path = tmp_path / "classes.toml"
    path.write_text(
        '[[class]]\nname = "A"\nhorizontal_datum_95_m = 0.02\noccupations = 2\nindependence = "independent"\n'
        '[[class]]\nname = "B"\nhorizontal_datum_95_m = 0.05\n'
    )
    classes = load_classes(path)
    figures = Figures(0.015, None, None, None, 2, "partly independent")
    assert office_class(classes, figures) == "B"
    assert classes[0].unmet(figures) == ["independence partly independent, wanted independent"]
    assert office_class(classes, replace(figures, independence="independent")) == "A"
    assert office_class(classes, replace(figures, horizontal_datum_95_m=None)) is None
    assert OfficeClass("C", vertical_datum_95_m=0.1).unmet(figures) == ["vertical_datum_95_m not known, at most 100 mm"]


@pytest.mark.parametrize(
    "text",
    ["", "x = 1", "[[class]]\nname = 'A'", "[[class]]\nname = 'A'\nhorizontal_datum_m = 1", "[class]\nname = 'A'",
     "[[class]]\nname = 'A'\noccupations = -1", "[[class]]\nname = 'A'\nhorizontal_datum_95_m = nan",
     "[[class]]\nname = 'A'\noccupations = 1\n[[class]]\nname = 'A'\noccupations = 2"],
)  # fmt: skip
def test_bad_class_files_are_refused(tmp_path: Path, text: str) -> None:
    path = tmp_path / "classes.toml"
    path.write_text(text)
    with pytest.raises(UsageError):
        load_classes(path)


def test_weighted_median() -> None:
    assert weighted_median([(1.0, 0.2), (2.0, 0.5), (9.0, 0.3)]) == 2.0
    assert weighted_median([(1.0, 0.5), (3.0, 0.5)]) == 2.0
    assert weighted_median([(5.0, 1.0), (1.0, -0.1)]) == 5.0
    with pytest.raises(ValueError, match="weight"):
        weighted_median([(1.0, 0.0)])


def test_the_command_keeps_the_two_accuracies_apart(register: Register, base: Evidence, run_fieldbook: Call) -> None:
    add(register, 0, [occupied(base, mark="A"), occupied(base, 2, mark="B", enu_m=(500.0, 0.0, 0.0), hours=2.0)])
    said = run_fieldbook("register", "coordinates", register.path, "A", "--json").json
    (mark,) = said["marks"]
    assert mark["datum_class"][0] == fgdc_class(mark["datum"]["horizontal95_m"])
    assert mark["between"]["lines"][0]["distance_m"] == pytest.approx(500.0, abs=1e-3)
    assert mark["between"]["horizontal95_worst_m"] < mark["datum"]["horizontal95_m"]
    text = run_fieldbook("register", "coordinates", register.path).out
    assert "relative to the datum, 95 %" in text
    assert "relative to neighbours 2, 95 %" in text
    assert run_fieldbook("register", "coordinates", register.path, "Z").code == 2


def test_one_mark_wanted_has_the_neighbours_it_has_among_all(register: Register, base: Evidence) -> None:
    from fieldbook.register.results import rows_of, tree_of

    places = np.random.default_rng(3).uniform(0.0, 5000.0, (40, 2))
    items = [
        occupied(base, n + 1, mark=f"M{n}", enu_m=(float(east), float(north), 0.0), hours=float(n))
        for n, (east, north) in enumerate(places)
    ]
    add(register, 0, items)
    every = {row.value.mark.number: tree_of(row) for row in rows_of(register)}
    for number in (1, 17, 40):
        (row,) = rows_of(register, only=[number])
        assert tree_of(row) == every[number]
