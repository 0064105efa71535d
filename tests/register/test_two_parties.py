"""The samples of both parties to one register, as an office would: questions, decisions, one list, files for others.

What is true of them stands in sample_sessions/*/truth.toml: northgate-2 stands 0.10 m from KR-07, northgate-3 read both heights
60 mm short, northgate-4 stands on SP-12 as it was set anew, 0.35 m from where it was.
"""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from recorded_samples import SAMPLES, record_into, truth_of

from fieldbook.clock import SystemClock
from fieldbook.reduce.geodesy import enu_difference
from fieldbook.register.combining import MarkValue, combine_register
from fieldbook.register.store import Register

from .conftest import Call
from .made import OFFICE


@pytest.fixture(scope="module")
def northgate(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The second party's book."""
    path = tmp_path_factory.mktemp("northgate") / "northgate.book"
    for number in (1, 2, 3, 4):
        record_into(path, SAMPLES / f"northgate-{number}" / "session.toml")
    return path


def error_enu_m(value: MarkValue, sample: str) -> tuple[float, float, float]:
    """The register's coordinate minus the truth."""
    truth = truth_of(sample)["client_frame"]
    assert value.place is not None
    start = (truth["lat_deg"], truth["lon_deg"], truth["h_m"])
    east, north, up = enu_difference(start, (value.place.lat_deg, value.place.lon_deg, value.place.h_m))
    return float(east), float(north), float(up)


def test_from_two_books_to_a_list_in_five_commands(
    sample_books: dict[str, Path], northgate: Path, tmp_path: Path, run_fieldbook: Call
) -> None:
    register = tmp_path / "office.register"
    who = ("--by", OFFICE, "--reason", "seen in the books")

    def run(*words: object) -> None:
        said = run_fieldbook("register", words[0], register, *words[1:])
        assert said.code == 0, said.err

    run("add", *sample_books.values(), northgate, "--by", OFFICE)
    asked = run_fieldbook("register", "proposals", register, "--json").json["proposals"]
    by_pair = {tuple(item["marks"]): item for item in asked}
    assert by_pair[1, 3]["case"] == "same name, near"
    assert by_pair[1, 4]["case"] == "other name, near"
    assert by_pair[1, 4]["distance_m"] == pytest.approx(0.10, abs=0.03)
    assert by_pair[2, 5]["case"] == "same name, apart"
    assert by_pair[2, 5]["suggested"][0] == "reset"
    assert by_pair[2, 5]["distance_m"] == pytest.approx(0.35, abs=0.03)
    run("decide", "same", "1", "3", *who)
    run("decide", "different", "1", "4", *who)
    run("decide", "reset", "2", "--from", by_pair[2, 5]["from_utc"], "--as", "5", *who)
    assert run_fieldbook("register", "proposals", register).out == "no open question\n"
    # the bad tie is named, and the robust place stands near the truth meanwhile
    with Register.open(register, clock=SystemClock()) as opened:
        values = {value.mark.number: value for value in combine_register(opened)}
        label = opened.state().marks()[1].occupations[-1].label  # the last in time
    assert "occupations_disagree" in [item.code for item in values[1].findings]
    assert abs(error_enu_m(values[1], "kestrel-ridge-1")[2]) < 0.025
    assert run_fieldbook("register", "check", register).code == 1
    refused = run_fieldbook("register", "publish", register, "1", *who)
    assert refused.code == 2
    run("decide", "exclude", label, *who)
    run("publish", "--all", *who)
    with Register.open(register, clock=SystemClock()) as opened:
        values = {value.mark.number: value for value in combine_register(opened)}
    for number, sample in ((1, "kestrel-ridge-1"), (4, "northgate-2"), (5, "northgate-4")):
        east, north, up = error_enu_m(values[number], sample)
        datum = values[number].datum
        assert math.hypot(east, north) <= datum.horizontal95_m
        assert abs(up) <= datum.vertical95_m
    assert values[1].parties["parties"] == ["Aldwater Geomatics", "Ferrow Tamsin Land Surveyors"]
    assert values[1].independence == "independent"
    for name in ("register.gpkg", "register.csv", "register.geojson", "register.kml"):
        run("export", "--out", tmp_path / name)
    assert run_fieldbook("verify", register).code == 0
