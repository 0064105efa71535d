"""The simulated receiver: the same seed gives the same bytes, sentences are sound, errors have the sizes they claim.

The sentences are read back with pynmea2 (1.19) as an independent reader, the checksum by a loop of our own. Sizes of
errors are the simulator's own table, no outside source: the test is that the stream has what the table says.
"""

from __future__ import annotations

import itertools
import math
import random
import statistics
import time
from dataclasses import replace

import pynmea2
import pytest

from fieldbook.clock import FakeClock
from fieldbook.links import LinkLost, make_link, parse_link
from fieldbook.links.sim_errors import SIZES, FixErrors, GaussMarkov
from fieldbook.links.sim_link import SimLink
from fieldbook.links.sim_scenarios import AUTONOMOUS, DEFAULT_SITE, FIXED, FLOAT, SCENARIOS
from fieldbook.links.sim_sentences import angle_text, moment
from fieldbook.links.sim_sky import SYSTEMS, Sky, dop
from fieldbook.links.simulate import Receiver, moved, write_stream

START_MS = 1_804_122_600_000  # 2027-03-04T01:10:00Z
QUIET = {"sky_every_s": 86_400}


def stream(name: str, seed: int = 7, seconds: float = 60.0, **changes: object) -> tuple[bytes, object]:
    scenario = replace(SCENARIOS[name], **changes)  # type: ignore[arg-type]
    return write_stream(scenario, seed=seed, first_utc_ms=START_MS, duration_s=seconds)


def lines_of(data: bytes) -> list[str]:
    lines = data.decode("ascii").split("\r\n")
    assert lines[-1] == ""
    return lines[:-1]


def gga_of(data: bytes) -> list[pynmea2.GGA]:
    return [pynmea2.parse(line, check=True) for line in lines_of(data) if line.startswith("$GNGGA")]


def offsets_m(data: bytes) -> list[tuple[float, float, float]]:
    """East, north, up of each fix from the reported point, m."""
    lat_deg, lon_deg, h_m = moved(DEFAULT_SITE, *DEFAULT_SITE.point_enu_m)
    found = []
    for item in gga_of(data):
        north = math.radians(item.latitude - lat_deg) * 6_357_500.0  # radius along the meridian at 34 degrees
        east = math.radians(item.longitude - lon_deg) * 6_385_000.0 * math.cos(math.radians(lat_deg))
        found.append((east, north, float(item.altitude) + float(item.geo_sep) - h_m))
    return found


@pytest.mark.parametrize("name", SCENARIOS)
def test_same_seed_same_bytes_other_seed_other_bytes(name: str) -> None:
    first, truth = stream(name, 7, 20)
    again, truth_again = stream(name, 7, 20)
    assert first == again
    assert truth == truth_again
    assert stream(name, 8, 20)[0] != first


@pytest.mark.parametrize("name", SCENARIOS)
def test_every_sentence_has_a_right_checksum_and_parses(name: str) -> None:
    data, _ = stream(name, 3, 30)
    kinds = set()
    for line in lines_of(data):
        body, _, checksum = line[1:].partition("*")
        total = 0
        for character in body:
            total ^= ord(character)
        assert f"{total:02X}" == checksum
        kinds.add(pynmea2.parse(line, check=True).identifier().rstrip(","))
    expected = {"GNGGA", "GNGST", "GNRMC", "GNZDA", "GNGSA", "GPGSV", "GLGSV", "GAGSV", "GBGSV"}
    assert {kind.replace("$", "") for kind in kinds} == expected


def test_fields_of_the_sentences() -> None:
    data, _ = stream("rtk", 7, 2)
    lines = lines_of(data)
    gga = lines[0].partition("*")[0].split(",")
    assert len(gga) == 15
    assert (gga[1], gga[6], gga[14], gga[3], gga[5]) == ("011000.00", "4", "0042", "S", "E")
    assert len(gga[2].partition(".")[2]) == len(gga[4].partition(".")[2]) == 8
    assert len(gga[11].partition(".")[2]) == 3
    rmc = next(line for line in lines if "RMC" in line).partition("*")[0].split(",")
    assert len(rmc) == 14
    assert (rmc[2], rmc[9], rmc[12], rmc[13]) == ("A", "040327", "R", "V")
    assert "$GNZDA,011000.00,04,03,2027,00,00" in lines[3]
    gsa = [line.partition("*")[0].split(",") for line in lines if "GSA" in line]
    assert {row[18] for row in gsa} == {"1", "2", "3", "4"}
    assert all(len(row) == 19 for row in gsa)
    gsv = [line.partition("*")[0].split(",") for line in lines if "GSV" in line]
    assert all((len(row) - 4) % 4 == 1 for row in gsv)  # the signal ID makes one field more
    signals = {(row[0], row[-1]) for row in gsv}
    assert {("$GPGSV", "1"), ("$GPGSV", "6"), ("$GLGSV", "1"), ("$GAGSV", "7"), ("$GBGSV", "B")} <= signals


def test_no_fix_leaves_fields_empty_and_says_so() -> None:
    data, _ = stream("cold-start", 7, 2)
    lines = lines_of(data)
    assert lines[0].startswith("$GNGGA,011000.00,,,,,0,00,,,,,,,*")
    rmc = next(line for line in lines if "RMC" in line)
    assert ",V,,,,,,," in rmc
    assert ",N,V*" in rmc
    assert all(line.split(",")[2] == "1" for line in lines if "GSA" in line)


def test_float_and_fixed_stages_and_the_truth_of_initialisations() -> None:
    data, truth = stream("reinit", 5, 500, **QUIET)
    qualities = [item.gps_qual for item in gga_of(data)]
    assert qualities == [5] * 15 + [4] * 225 + [5] * 15 + [4] * 120 + [5] * 20 + [4] * 105
    assert truth.epochs_by_quality == {5: 50, 4: 450}
    assert [
        ((item.from_utc_ms - START_MS) // 1000, (item.to_utc_ms - START_MS) // 1000, math.hypot(*item.wrong_enu_m) > 0)
        for item in truth.initialisations
    ] == [(15, 239, False), (255, 374, True), (395, 499, False)]
    east = [row[0] for row in offsets_m(data)]
    assert statistics.median(east[255:375]) - statistics.median(east[15:240]) == pytest.approx(0.24, abs=0.04)


def test_midnight_turns_the_date_in_rmc_and_zda() -> None:
    start_ms = START_MS // 86_400_000 * 86_400_000 + 86_398_000
    data, _ = write_stream("rtk", seed=1, first_utc_ms=start_ms, duration_s=4)
    dates = [
        (row.datestamp.isoformat(), row.timestamp.isoformat())
        for row in map(pynmea2.parse, lines_of(data))
        if row.sentence_type == "RMC"
    ]
    assert [row[0] for row in dates] == ["2027-03-04"] * 2 + ["2027-03-05"] * 2
    assert dates[2][1].startswith("00:00:00")
    assert ",05,03,2027," in [line for line in lines_of(data) if "ZDA" in line][2]


def test_gaps_and_missing_epochs_are_silent_and_recorded() -> None:
    data, truth = stream("gaps", 2, 400, **QUIET)
    seconds = [item.timestamp for item in gga_of(data)]
    assert truth.epochs == len(seconds) < 340
    assert [((a - START_MS) // 1000, (b - START_MS) // 1000) for a, b in truth.gaps_utc_ms] == [
        (100, 120),
        (220, 240),
        (340, 360),
    ]
    in_gap = [at for at in seconds if (at.minute * 60 + at.second) - 600 in range(100, 120)]
    assert in_gap == []


def test_strays_are_in_the_truth_and_nothing_else_moves() -> None:
    clean, _ = stream("rtk", 4, 600, **QUIET)
    stray, truth = stream("rtk", 4, 600, outlier_share=0.02, **QUIET)
    moved_at = [
        index
        for index, (a, b) in enumerate(zip(offsets_m(clean), offsets_m(stray), strict=True))
        if math.dist(a, b) > 0.001
    ]
    assert [START_MS + 1000 * index for index in moved_at] == truth.outliers_utc_ms
    assert len(moved_at) >= 5


def test_rate_of_ten_hertz() -> None:
    data, _ = stream("rtk-10hz", 7, 2)
    times = [line.split(",")[1] for line in lines_of(data) if "GGA" in line]
    assert times == [f"01100{n // 10}.{n % 10}0" for n in range(20)]
    assert data.count(b"ZDA") == 2  # satellites and date once a second


def test_offsets_are_where_the_truth_says_when_errors_are_taken_away(monkeypatch) -> None:
    monkeypatch.setattr(FixErrors, "step", lambda self, seconds: (0.0, 0.0, 0.0))
    monkeypatch.setattr(FixErrors, "draw_initialisation", lambda self: (0.0, 0.0, 0.0))
    data, _ = stream("rtk", 7, 3, **QUIET)
    for row in offsets_m(data):
        assert row == pytest.approx((0.0, 0.0, 0.0), abs=1e-4)  # 8 decimals: 0.02 mm; altitude 0.1 mm


def test_moving_a_point_agrees_with_pygeodesy() -> None:
    """Witness: pygeodesy's local east-north-up on GRS80. Tolerance 0.01 mm, the docstring's."""
    ltp = pytest.importorskip("pygeodesy.ltp")
    ellipsoid = pytest.importorskip("pygeodesy.datums").Datums.GRS80
    frame = ltp.Ltp(DEFAULT_SITE.lat_deg, DEFAULT_SITE.lon_deg, DEFAULT_SITE.h_m, ecef=ltp.EcefKarney(ellipsoid))
    for east, north, up in ((1.0, 2.0, 1.5), (-3.0, 0.5, -2.0)):
        lat_deg, lon_deg, h_m = moved(DEFAULT_SITE, east, north, up)
        local = frame.forward(lat_deg, lon_deg, h_m)
        assert (local.x, local.y, local.z) == pytest.approx((east, north, up), abs=1e-5)


@pytest.mark.parametrize(("quality", "name"), [(FIXED, "rtk"), (AUTONOMOUS, "autonomous")])
def test_errors_have_the_size_of_their_table(quality: int, name: str) -> None:
    """Spread over 200 seeds of single fixes an hour in: the total variance of the table. Four standard errors wide."""
    sizes = SIZES[quality]
    expected = math.sqrt(
        sizes.white_m**2 + sizes.fast_m**2 + sizes.slow_m**2 + sizes.wave_m**2 / 2 + sizes.session_m**2
    )
    found: list[list[float]] = [[], [], []]
    for seed in range(200):
        errors = FixErrors(quality, random.Random(seed))
        for _ in range(3):
            last = errors.step(1200.0)
        for axis in range(3):
            found[axis].append(last[axis])
    for axis, factor in enumerate((1.0, 1.0, sizes.up_factor)):
        spread = math.sqrt(statistics.fmean(value * value for value in found[axis]))
        assert spread == pytest.approx(factor * expected, rel=4.0 / math.sqrt(2 * 200))


def test_gauss_markov_autocorrelation_is_exponential() -> None:
    """Lag correlation exp(-dt/tau) of a first-order process, 40 000 steps; tolerance 0.05, about three sigma."""
    process = GaussMarkov(2.0, 60.0, random.Random(11))
    values = [process.step(1.0) for _ in range(40_000)]
    variance = statistics.fmean(value * value for value in values)
    for lag in (1, 30, 60, 120):
        product = statistics.fmean(a * b for a, b in zip(values, values[lag:], strict=False))
        assert product / variance == pytest.approx(math.exp(-lag / 60.0), abs=0.05)
    assert math.sqrt(variance) == pytest.approx(2.0, rel=0.15)


@pytest.mark.parametrize(("name", "least"), [("rtk", 0.6), ("autonomous", 0.75), ("float", 0.9)])
def test_fixes_are_correlated_from_second_to_second(name: str, least: float) -> None:
    """Lag-1 autocorrelation over 20 minutes: one, less the share of white noise in what varies within that time."""
    data, _ = stream(name, 21, 1200, **QUIET)
    for axis in range(2):
        values = [row[axis] for row in offsets_m(data)]
        mean = statistics.fmean(values)
        moments = [(a - mean) * (b - mean) for a, b in itertools.pairwise(values)]
        assert statistics.fmean(moments) / statistics.pvariance(values) > least


def test_float_converges(monkeypatch) -> None:
    """Without noise a float solution decays as exp(-t/150 s) from where it was drawn; tolerance 0.3 mm (printed digits)."""
    monkeypatch.setattr(FixErrors, "step", lambda self, seconds: (0.0, 0.0, 0.0))
    rows = offsets_m(stream("float", 7, 460, **QUIET)[0])
    assert math.hypot(*rows[0]) > 0.05
    for second in (150, 300, 450):
        for axis in range(3):
            assert rows[second][axis] == pytest.approx(rows[0][axis] * math.exp(-second / 150.0), abs=3e-4)


def test_float_stays_decimetres_away() -> None:
    """Root mean square horizontal error ten minutes in, over 8 seeds: the table's 0.20 m of both axes, less and more."""
    late = [
        math.hypot(*row[:2]) for seed in range(8) for row in offsets_m(stream("float", seed, 660, **QUIET)[0])[600:]
    ]
    assert 0.08 < math.sqrt(statistics.fmean(value * value for value in late)) < 0.40


def test_sky_is_plausible() -> None:
    scenario = SCENARIOS["rtk"]
    sky = Sky(DEFAULT_SITE.lat_deg, DEFAULT_SITE.lon_deg, scenario.mask_deg, scenario.obstruction, random.Random(1))
    before: dict[tuple[str, int], tuple[float, float]] = {}
    risen = set()
    for second in range(0, 6 * 3600, 60):
        seen = sky.at(START_MS / 1000 + second)
        figures = dop(seen)
        assert figures is not None
        assert 0.3 < figures.hdop < 2.0
        assert figures.pdop == pytest.approx(math.hypot(figures.hdop, figures.vdop))
        now = {}
        for item in seen:
            key = (item.system.name, item.number)
            now[key] = (item.azimuth_deg, item.elevation_deg)
            assert item.elevation_deg >= scenario.mask_deg
            covered = 205.0 <= item.azimuth_deg <= 260.0 and item.elevation_deg < 32.0
            assert item.used is not covered
            assert all(level is None or 25 <= level <= 55 for level in item.cn0_dbhz)
            if key in before:  # an arc: at most half a degree of elevation a minute
                assert abs(item.elevation_deg - before[key][1]) < 0.8
        risen |= now.keys() - before.keys()
        before = now
    assert {system.name for system in SYSTEMS} == {name for name, _ in risen}
    assert len(risen) > 60


def test_gps_track_repeats_after_a_sidereal_day() -> None:
    """Two revolutions in 86 164.1 s (check value: IS-GPS-200 nominal period, from memory): same azimuth, elevation."""
    sky = Sky(DEFAULT_SITE.lat_deg, DEFAULT_SITE.lon_deg, 10.0, None, random.Random(1))
    today = {i.number: (i.azimuth_deg, i.elevation_deg) for i in sky.at(1.8e9) if i.system.name == "GPS"}
    later = {i.number: (i.azimuth_deg, i.elevation_deg) for i in sky.at(1.8e9 + 86_164.1) if i.system.name == "GPS"}
    common = today.keys() & later.keys()
    assert len(common) >= 5
    for number in common:
        assert later[number] == pytest.approx(today[number], abs=0.01)


def test_dop_of_a_known_geometry() -> None:
    """Zenith and three at the horizon, 120 degrees apart. By hand: HDOP = sqrt(4/3), VDOP = sqrt(4/3)."""
    from fieldbook.links.sim_sky import Seen

    seen = [Seen(SYSTEMS[0], 1, 0.0, 90.0, (45,)), *(Seen(SYSTEMS[0], n, 120.0 * n, 0.0, (40,)) for n in range(2, 5))]
    figures = dop(seen)
    assert figures is not None
    assert (figures.hdop, figures.vdop) == pytest.approx((math.sqrt(4 / 3), math.sqrt(4 / 3)))
    assert dop(seen[:3]) is None


@pytest.mark.parametrize(
    ("degrees", "digits", "decimals", "text"),
    [
        (34.2743161, 2, 8, "3416.45896600"),
        (-34.2743161, 2, 4, "3416.4590"),
        (145.99999999999, 3, 7, "14600.0000000"),  # never 145 degrees and 60 minutes
        (5.5, 3, 3, "00530.000"),
    ],
)
def test_angles(degrees: float, digits: int, decimals: int, text: str) -> None:
    assert angle_text(degrees, digits, decimals) == text


# The link ------------------------------------------------------------------------------------------------------------


def test_link_runs_on_the_clock_from_the_current_second() -> None:
    link = make_link(parse_link("sim:rtk-10hz?seed=7"))
    assert isinstance(link, SimLink)
    before_ms = time.time_ns() // 1_000_000
    link.open()
    begun = time.monotonic()
    received = b""
    while time.monotonic() - begun < 1.5:
        received += link.read(0.25)
    fixes = [item.timestamp for item in gga_of(received)]
    first = moment(before_ms // 1000 * 1000)
    assert abs(
        (fixes[0].hour * 3600 + fixes[0].minute * 60 + fixes[0].second)
        - (first.hour * 3600 + first.minute * 60 + first.second)
    ) in {0, 1, 86399}
    assert 13 <= len(fixes) <= 27
    assert link.truth is not None
    assert link.truth.epochs == len(fixes)
    link.close()
    with pytest.raises(LinkLost):
        link.read(0.1)


def test_link_equals_the_file_of_the_same_seed() -> None:
    clock = FakeClock(5_000, START_MS + 400)
    link = SimLink(parse_link("sim:rtk?seed=9&speed=10"), clock=clock)
    link.open()
    clock.advance(2_000)  # at ten times the speed: 24 s have passed since the full second
    received = b""
    while data := link.read(0.0):
        received += data
    expected, _ = write_stream("rtk", seed=9, first_utc_ms=START_MS, duration_s=24)
    assert received == expected
    link.close()


def test_link_waits_no_longer_than_told() -> None:
    link = make_link(parse_link("sim:rtk?seed=7"))
    link.open()
    while link.read(0.0):
        pass
    begun = time.monotonic()
    assert link.read(0.05) == b"" or time.monotonic() - begun < 0.2
    assert time.monotonic() - begun < 0.3
    link.close()


def test_receiver_changes_rate_on_request() -> None:
    receiver = Receiver(SCENARIOS["rtk"], seed=1, first_utc_ms=START_MS, rate_hz=5)
    assert [receiver.next_burst().utc_ms - START_MS for _ in range(3)] == [0, 200, 400]
    assert receiver.scenario.stages[0].quality == FIXED != FLOAT
