"""The 21 traps that published data, libraries and habit hold for a program of this kind, each with our answer or refusal.

One test per trap, in the order of the list the project keeps; where another file goes further, its name stands beside.
"""

from __future__ import annotations

import math
from datetime import date

import numpy as np
import pytest
from nmea.feeding import decoded, gga, sentence
from published_tables import DATA, alic, dms, epsg, table
from pyproj import Transformer
from pyproj.transformer import TransformerGroup

from fieldbook.check.repeats import Circumstance, grade
from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.reduction import ClientPosition, Operation, OperationStep
from fieldbook.model.session import Antenna, FrameChoice, HeightReading, Setup
from fieldbook.nmea.dates import rollover_weeks
from fieldbook.nmea.decoder import DecoderOptions
from fieldbook.reduce.antenna import reduce_antenna
from fieldbook.reduce.frames import check_frames, operation_codes, project, transform_to_client, undulation_by_proj
from fieldbook.reduce.geodesy import Helmert, apply_helmert
from fieldbook.reduce.geoid import height_above_geoid
from fieldbook.reduce.geoidgrid import read_gtx
from fieldbook.reduce.region import circle_radius, region_95
from fieldbook.reduce.summary_statistics import summarise, variance_of_mean_ar1
from fieldbook.reduce.terms import operation_terms

ALICE = (-23.67, 133.885, 600.0)
EPOCH = 2027.2


def test_1_one_pass_variance() -> None:
    """NIST StRD NumAcc4: sd 0.1 of ten million; sum of squares minus n mean squared is negative. Ours to 1e-7."""
    values = np.loadtxt(DATA / "strd_numacc4.txt")
    one_pass = float(np.sum(values**2) - len(values) * np.mean(values) ** 2)
    assert one_pass < 0
    assert summarise(values).sd == pytest.approx(0.1, rel=1e-7)


def test_2_naive_mean_of_a_correlated_series() -> None:
    """Three minutes at 1 Hz: s/sqrt(n) is 9 to 13 times too small for published correlation times of 60 to 1020 s."""
    for tau_s, too_small in ((60, 9.06), (115, 10.67), (1020, 13.03)):
        ratio = math.sqrt(variance_of_mean_ar1(math.exp(-1 / tau_s), 180) * 180)
        assert ratio == pytest.approx(too_small, abs=0.01)


def test_3_prints_with_errors() -> None:
    """Not met, and not to be met: GN 7-2 transverse Mercator (6 and 8 mm), older time-dependent Helmert (12 mm), PROJ's
    downsampled EGM96 value (0.37 m). Lambert radians and the data sheet's longitude: test_parameters_published."""
    older = apply_helmert((-3789470.702, 4841770.411, -1690893.950), epsg("6276"), 2013.9)
    assert np.linalg.norm(older - [-3789470.008, 4841770.685, -1690895.103]) == pytest.approx(0.0148, abs=0.0008)
    from importlib import resources
    from pathlib import Path

    grid = read_gtx(Path(str(resources.files("fieldbook") / "data")) / "egm96_15.gtx")
    assert abs(grid.undulation(55.5, 12.5).value_m - 36.3941) == pytest.approx(0.3728, abs=1e-3)


def test_4_rotation_convention() -> None:
    """GDA94 to GDA2020 with the other sign: 3.62 m. The gateway takes the operation by code, convention included."""
    right = epsg("8048")
    wrong = Helmert(right.translation_m, right.rotation_mas, right.scale_ppb, "position vector")
    off = apply_helmert(alic("GDA94 (3.1.1)"), wrong) - np.array(alic("GDA2020 by 7 parameters (3.1.1)"))
    assert np.linalg.norm(off) == pytest.approx(3.62, abs=0.01)
    place = dms(-23, 40, 12.446019), dms(133, 53, 7.847844), 603.3466
    client, _ = transform_to_client(FrameChoice("EPSG:4939", "EPSG:7843"), *place, EPOCH)
    assert client is not None
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx(alic("GDA2020 by 7 parameters (3.1.1)"), abs=1e-4)


@pytest.mark.parametrize("ensemble", ["EPSG:4979", "EPSG:4937"])
def test_5_ensembles(ensemble: str) -> None:
    """PROJ offers a null copy with an accuracy of 1 to 3 m and no ballpark flag; we refuse the code."""
    offered = TransformerGroup("EPSG:4979", "EPSG:7843", always_xy=True, allow_ballpark=False)
    null = next(item for item in offered.transformers if item.accuracy == 3.0)
    assert null.transform(133.885, -23.67, 600.0) == pytest.approx((133.885, -23.67, 600.0), abs=1e-9)
    for choice in (FrameChoice(ensemble, "EPSG:7843"), FrameChoice("EPSG:7843", ensemble)):
        with pytest.raises(UsageError, match="ensemble"):
            check_frames(choice)


def test_6_epoch_omitted() -> None:
    """PROJ then takes the parameters' own, 0.482 m at Alice Springs; we ask for it, and pass it."""
    silent = Transformer.from_crs("EPSG:7912", "EPSG:7843", always_xy=True)
    assert silent.transform(133.885, -23.67, 600.0) == pytest.approx((133.885, -23.67, 600.0), abs=1e-8)
    with pytest.raises(UsageError, match="receiver_epoch is missing"):
        check_frames(FrameChoice("EPSG:7912", "EPSG:7843"))
    _, operation = transform_to_client(FrameChoice("EPSG:7912", "EPSG:7843", "observation"), *ALICE, EPOCH)
    assert math.hypot(*(operation.shift_enu_m or [])[:2]) == pytest.approx(0.482, abs=0.001)


def test_7_accuracy_zero_and_minus_one() -> None:
    """0.0 is a definition and printed so; -1 is what a transformer of several candidates says, and never reaches a result."""
    several = Transformer.from_crs("EPSG:10605", "EPSG:7843", always_xy=True, allow_ballpark=False)
    assert several.accuracy == -1.0
    step = OperationStep("EPSG", "8970", "ITRF2014 to NAD83(2011) (1)", 0.0)
    (line,) = operation_terms(Operation("", [step], EPOCH, True, []))
    assert line.note.startswith("by definition")
    choice = FrameChoice("EPSG:10605", "EPSG:7843", receiver_epoch="observation")
    _, operation = transform_to_client(choice, *ALICE, EPOCH)
    assert all((item.accuracy_m or 0.0) >= 0.0 for item in operation.steps)
    assert operation.accuracy_m == pytest.approx(0.041)


def test_8_missing_geoid_grid() -> None:
    """EPSG:4979 to 9518 without its grid returns the height unchanged, up to 107 m wrong; we name the file."""
    unchanged = Transformer.from_crs("EPSG:4979", "EPSG:9707", always_xy=True).transform(-90.221, 38.628, 100.0)
    assert unchanged[2] == pytest.approx(100.0)
    client = _client("EPSG:7912")
    with pytest.raises(ReductionError) as refused:
        height_above_geoid(client, "egm96_05.gtx", [], epoch_of_observation=EPOCH)
    assert refused.value.code == "geoid_missing"
    assert "egm96_05.gtx" in refused.value.text


def test_9_bilinear_interpolation() -> None:
    """At the six NGA points PROJ is up to 56 mm off, six-point Lagrange 3 mm."""
    from importlib import resources
    from pathlib import Path

    path = Path(str(resources.files("fieldbook") / "data")) / "egm96_15.gtx"
    points = [(float(row["lat"]), float(row["lon"]), float(row["N"])) for row in table("egm96_nga_points.csv")]
    grid = read_gtx(path)
    assert max(abs(undulation_by_proj(path, lat, lon) - n) for lat, lon, n in points) == pytest.approx(0.056, abs=0.001)
    assert max(abs(grid.undulation(lat, lon).value_m - n) for lat, lon, n in points) < 0.003


def test_10_geoid_of_another_frame() -> None:
    """A global model with NAD83(2011), 0.99 m from ITRF2020 in height: refused. National models go only with their own
    frame (9 cm between GDA94 and GDA2020): test_geoid."""
    here = ClientPosition("EPSG:6319", "NAD83(2011)", None, 39.22, -98.54, 570.0, None, None, None)
    with pytest.raises(ReductionError) as refused:
        height_above_geoid(here, "egm96_15.gtx", [], epoch_of_observation=EPOCH)
    assert refused.value.code == "geoid_frame"


def test_11_sign_of_the_convergence() -> None:
    """GDA2020 Technical Manual, table C.1, Flinders Peak: -1 35 03.647 there, azimuth + it = bearing; ours is +1.58435, azimuth
    = bearing + it, and the certificate says so."""
    from fieldbook.certificate.words import CONVERGENCE_SENTENCE

    plane = project(
        "EPSG:7843", "EPSG:7855", dms(-37, 57, 3.7203), dms(144, 25, 29.5244), 0.0, outside_area_accepted=False
    )
    assert plane.convergence_deg == pytest.approx(-dms(-1, 35, 3.647), abs=1e-6)
    assert "azimuth = grid bearing + convergence" in CONVERGENCE_SENTENCE


def test_12_three_coordinates_of_one_mark() -> None:
    """ALIC by seven parameters and by plate motion, 6 mm apart, each reached by its own operation and not by the other."""
    motion = transform_to_client(
        FrameChoice("EPSG:7912", "EPSG:7843", receiver_epoch=2018.0), *_place("ITRF2014 at 2018.0 (3.3.1)"), EPOCH
    )
    helmert = transform_to_client(FrameChoice("EPSG:4939", "EPSG:7843"), *_place("GDA94 (3.1.1)"), EPOCH)
    found = []
    for (client, operation), code in ((motion, "EPSG:8049"), (helmert, "EPSG:8048")):
        assert client is not None
        assert operation_codes(operation) == [code]
        found.append([client.x_m, client.y_m, client.z_m])
    assert found[0] == pytest.approx(alic("GDA2020 by plate motion (3.3.1)"), abs=1e-4)
    assert found[1] == pytest.approx(alic("GDA2020 by 7 parameters (3.1.1)"), abs=1e-4)
    assert np.linalg.norm(np.subtract(found[0], found[1])) > 0.005  # type: ignore[arg-type]


def test_13_units_of_parameters() -> None:
    """EPSG:7940 is in centimetres; ITRF2000 to ETRF2000 by the gateway meets EUREF TN 1 (test_frames_published), and by 7940
    our own code the EPN tutorial to 0.1 mm. Every unit: test_parameters_published."""
    found = apply_helmert((4027894.006, 307045.600, 4919474.910), epsg("7940"), 2012.0)
    assert found == pytest.approx([4027894.3559, 307045.2508, 4919474.6447], abs=1e-4)


def test_14_radius_or_diameter_and_vertical_for_slant() -> None:
    """Two readings of one height, one of them a slip: stopped, and the slip is named."""
    antenna = Antenna("any", slant_radius_m=0.1905, slant_mark_above_arp_m=0.0350)
    from decimal import Decimal

    slant = HeightReading("slant", Decimal("1.8527"), "m", "before")
    vertical = HeightReading("vertical", Decimal("1.8527"), "m", "before")
    found = reduce_antenna(Setup("ARP", "optical plummet", 0.001, reading_sigma_m=0.001), antenna, [slant, vertical])
    finding = next(item for item in found.findings if item.code == "heights_differ_within")
    assert finding.severity == "stop"
    assert "vertical" in finding.text


def test_15_datum_sentence_says_w84_whatever_the_corrections() -> None:
    """W84 sets no flag and names no frame: the frame stays the one the party states. Another datum is set aside until confirmed."""
    said = sentence("GNDTM,W84,,0.0,N,0.0,E,0.0,W84")
    other = sentence("GNDTM,999,,0.0,N,0.0,E,0.0,W84")
    for datum, wanted in ((said, None), (other, "999")):
        epochs, _ = decoded(datum + gga("100400.00") + gga("100401.00"), DecoderOptions())
        assert [item.datum for item in epochs] == [wanted, wanted]


def test_16_nssda_factors() -> None:
    """2.4477 times the mean of unequal axes is 9.8 % too small at b/a = 0.5, 37.6 % at 0; ours is the exact circle."""
    for ratio, short in ((0.5, -0.098), (1e-6, -0.376)):
        exact = circle_radius(np.diag([1.0, ratio**2]))
        assert 2.4477 * (1 + ratio) / 2 / exact - 1 == pytest.approx(short, abs=0.001)


def test_17_few_degrees_of_freedom() -> None:
    """2.4477 at nu = 4 is half of what is needed: 3.727 with a known shape, 5.05 with an estimated one, which is used."""
    assert region_95(np.eye(2), 4, 4).ellipse.major == pytest.approx(5.05, abs=5e-3)
    assert region_95(np.eye(2), 4, 4).radius_m > 2 * 2.4477


def test_18_same_hour_next_day() -> None:
    """24 h less 4 min later the same satellites stand in the same places: not independent, though a day apart."""

    def at(number: int, start: str, end: str) -> Circumstance:
        return Circumstance(
            number, start, end, 0.008, 0.015, True, arp_height_m=1.5, tribrach="T", antenna="A 1", observer="K",
            station="1", receiver="R", entry_seq=number,
        )  # fmt: skip

    one = at(1, "2027-03-04T01:00:00.000Z", "2027-03-04T01:20:00.000Z")
    two = at(2, "2027-03-05T00:56:00.000Z", "2027-03-05T01:16:00.000Z")
    assert grade(one, two, 4.0).grade == "not independent"


def test_19_fields_that_libraries_lose() -> None:
    """A GSV of three satellites ends in a signal ID, which one library reads as a fourth satellite: three are shown. The
    system ID of GSA and the status of GNS: tests of the decoder."""
    gsv = sentence("GPGSV,1,1,03,04,45,120,40,09,30,200,38,17,60,300,45,1")
    epochs, decoder = decoded(gsv + gga("100400.00") + gga("100401.00"))
    assert len(epochs) == 2
    assert {item.number for item in decoder.sky} == {4, 9, 17}


def test_20_week_rollover() -> None:
    """1024 weeks early is 7168 days, 1.31 m of plate motion at Alice Springs: suspected, said, and applied only by decision."""
    assert rollover_weeks(date(2011, 9, 18), date(2031, 5, 4)) == 1024
    late, _ = transform_to_client(FrameChoice("EPSG:7912", "EPSG:7843", "observation"), *ALICE, EPOCH)
    early, _ = transform_to_client(FrameChoice("EPSG:7912", "EPSG:7843", "observation"), *ALICE, EPOCH - 7168 / 365.25)
    assert late is not None
    assert early is not None
    off = math.dist((late.x_m or 0, late.y_m or 0, late.z_m or 0), (early.x_m or 0, early.y_m or 0, early.z_m or 0))
    assert off == pytest.approx(1.31, abs=0.01)


def test_21_out_of_area() -> None:
    """PROJ answers London in GDA2020 and longitude 60 E in MGA zone 55 with plausible figures, a latitude of 144 with inf: all
    three are refused with a reason."""
    plausible = Transformer.from_crs("EPSG:7843", "EPSG:7855", always_xy=True).transform(60.0, -30.0)
    assert all(math.isfinite(value) for value in plausible)
    choice = FrameChoice("EPSG:7912", "EPSG:7843", "observation")
    with pytest.raises(ReductionError) as london:
        transform_to_client(choice, 51.5, 0.0, 0.0, EPOCH)
    assert london.value.code == "outside_area"
    with pytest.raises(ReductionError) as zone:
        project("EPSG:7843", "EPSG:7855", -30.0, 60.0, None, outside_area_accepted=False)
    assert zone.value.code == "outside_area"
    with pytest.raises(ReductionError) as exchanged:
        transform_to_client(choice, 144.0, -37.0, 0.0, EPOCH)
    assert exchanged.value.code == "no_position"
    assert "exchanged" in exchanged.value.remedy


def _place(case: str) -> tuple[float, float, float]:
    from fieldbook.reduce.geodesy import geographic

    return geographic(alic(case))


def _client(frame: str) -> ClientPosition:
    return ClientPosition(frame, "any", EPOCH, -23.67, 133.885, 600.0, None, None, None)
