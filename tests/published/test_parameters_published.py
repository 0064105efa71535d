"""Parameters of the frames as their publishers print them, their consistency, and the examples that rest on them.

Rows of the check values that no other file of this folder holds: units of the EPSG data set, routes that must agree,
velocities of EUREF TN 1, examples of old frames, prints that are known to be wrong.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest
from published_tables import alic, dms, epsg, table
from pyproj import Proj
from pyproj.crs import CoordinateOperation  # type: ignore[attr-defined]

from fieldbook.model.session import Antenna, FrameChoice, Setup
from fieldbook.reduce.antenna import arp_height_m
from fieldbook.reduce.frames import operation_codes, transform_to_client
from fieldbook.reduce.geodesy import Helmert, apply_helmert, enu_of_xyz, geocentric, geographic

CODES = [row["code"] for row in table("helmert_parameters_epsg.csv")]
UNITS = {"metre": 1.0, "centimetre": 0.01, "millimetre": 0.001, "millimetres per year": 0.001, "metre per year": 1.0,
         "metres per year": 1.0, "centimetres per year": 0.01, "milliarc-second": 1.0, "arc-second": 1000.0,
         "milliarc-seconds per year": 1.0, "arc-seconds per year": 1000.0, "parts per billion": 1.0,
         "parts per million": 1000.0, "parts per billion per year": 1.0, "parts per million per year": 1000.0,
         "year": 1.0}  # fmt: skip


@pytest.mark.parametrize("code", CODES)
def test_parameters_in_the_data_set(code: str) -> None:
    """EPSG v11.022 inside PROJ against data/helmert_parameters_epsg.csv, unit by unit. EPSG:7940 stores its translations in
    centimetres, EPSG:8048 in metres, others in millimetres: whoever assumes a unit is wrong by ten or a thousand."""
    tree = CoordinateOperation.from_authority("EPSG", code).to_json_dict()
    found = {}
    for item in tree["parameters"]:
        unit = item.get("unit", "")
        name = unit["name"] if isinstance(unit, dict) else unit
        found[item["name"]] = float(item["value"]) * UNITS[name]
    ours = epsg(code)
    for axis, letter in enumerate("XYZ"):
        assert found[f"{letter}-axis translation"] == pytest.approx(ours.translation_m[axis], abs=1e-9)
        assert found[f"{letter}-axis rotation"] == pytest.approx(ours.rotation_mas[axis], abs=1e-7)
        if ours.reference_epoch is not None:
            rate = f"Rate of change of {letter}-axis"
            assert found[f"{rate} translation"] == pytest.approx(ours.translation_rate_m[axis], abs=1e-9)
            assert found[f"{rate} rotation"] == pytest.approx(ours.rotation_rate_mas[axis], abs=1e-7)
    assert found["Scale difference"] == pytest.approx(ours.scale_ppb, abs=1e-6)
    method = tree["method"]["name"].lower()
    assert ("position vector" in method) == (ours.convention == "position vector")
    if ours.reference_epoch is not None:
        assert found["Parameter reference epoch"] == pytest.approx(ours.reference_epoch)


def test_epsg_7940_is_in_centimetres() -> None:
    """5.4 cm, not 5.4 mm: the gateway moves the EUREF station by what the note prints (test_euref_technical_note)."""
    tree = CoordinateOperation.from_authority("EPSG", "7940").to_json_dict()
    first = next(item for item in tree["parameters"] if item["name"] == "X-axis translation")
    assert (first["value"], first["unit"]["name"]) == (5.4, "centimetre")
    assert epsg("7940").translation_m[0] == pytest.approx(0.054)


@pytest.mark.parametrize("epoch", [1990.0, 2010.0, 2027.2])
def test_routes_to_nad83_agree(epoch: float) -> None:
    """NGS: ITRF2020 directly (10334), by ITRF2014 (9991 inverse, 8970) and by ITRF2008 (9992 inverse, 7807): to 0.002 mm, the
    product of two small rotations left out of none of them."""
    start = geocentric(39.2241, -98.5422, 573.96)
    direct = apply_helmert(start, epsg("10334"), epoch)
    for back, forth in (("9991", "8970"), ("9992", "7807")):
        other = apply_helmert(apply_helmert(start, epsg(back), epoch, inverse=True), epsg(forth), epoch)
        assert other == pytest.approx(direct, abs=2e-6)


@pytest.mark.parametrize("epoch", [1989.0, 2010.0, 2027.2])
def test_two_ways_to_write_etrf2014(epoch: float) -> None:
    """EPSG 8366 (epoch 1989.0) and 8880 (2010.0) are one transformation; 10572 and 10573 too. Tolerance 0.001 mm."""
    start = geocentric(50.1, 8.7, 150.0)
    for one, two in (("8366", "8880"), ("10572", "10573")):
        assert apply_helmert(start, epsg(one), epoch) == pytest.approx(apply_helmert(start, epsg(two), epoch), abs=1e-6)


def test_inverse_is_not_the_negated_parameters() -> None:
    """WGS 72 case of IOGP 373-7-2: forward with negated parameters is 0.026 mm off the exact inverse: we invert exactly."""
    start = np.array([3657660.66, 255768.55, 5201382.11])
    there = Helmert((0, 0, 4.5), (0, 0, 554.0), 219.0, "position vector")
    back = Helmert((0, 0, -4.5), (0, 0, -554.0), -219.0, "position vector")
    after = apply_helmert(start, there)
    assert apply_helmert(after, there, inverse=True) == pytest.approx(start, abs=1e-8)
    assert np.linalg.norm(apply_helmert(after, back) - start) == pytest.approx(2.6e-5, abs=1.5e-5)


VELOCITIES = {  # EUREF Technical Note 1, m/a at 2010.0; the last digit of the print as tolerance
    # X is carried second-hand as +0.00011; the note's own coordinates, 3.9585 at 2010.0 and 3.9574 at 2020.0, say minus
    "ETRF2020": ("ITRF2020", "10572", (-0.00011, 0.00011, 0.00024), 1e-5),
    "ETRF2014": ("ITRF2014", "8366", (0.0002, -0.0003, 0.0002), 1e-4),
    "ETRF2000": ("ITRF2000", "7941", (-0.0002, -0.0005, -0.00036), 1e-4),
}
ITRF_VELOCITIES = {
    "ITRF2020": (-0.01361, 0.01686, 0.01024),
    "ITRF2014": (-0.01361, 0.01676, 0.01044),
    "ITRF2000": (-0.01307, 0.01690, 0.00908),
}


@pytest.mark.parametrize("target", list(VELOCITIES))
def test_velocities_of_euref_technical_note(target: str) -> None:
    """EUREF Technical Note 1 (31 January 2024), station velocities: the ITRF velocity carried into the ETRF is what is left of
    the station's motion there."""
    source, code, published, digit = VELOCITIES[target]
    xyz = np.array(
        next(
            [float(row[axis]) for axis in "XYZ"]
            for row in table("euref_tn1_examples.csv")
            if row["frame"] == source and float(row["epoch"]) == 2010.0
        )
    )
    velocity = np.array(ITRF_VELOCITIES[source])
    before, after = (apply_helmert(xyz + dt * velocity, epsg(code), 2010.0 + dt) for dt in (-1.0, 1.0))
    assert (after - before) / 2.0 == pytest.approx(published, abs=1.2 * digit)


@pytest.mark.parametrize(
    ("receiver", "client", "epoch", "start", "published", "tolerance"),
    [
        ("EPSG:7909", "EPSG:7905", 2017.0, (3370658.378, 711877.314, 5349787.086),
         (3370658.18890, 711877.42370, 5349787.12430), 3e-5),
        ("EPSG:7909", "EPSG:7905", 2018.0, (3370658.378, 711877.314, 5349787.086),
         (3370658.18087, 711877.42750, 5349787.12648), 3e-5),
        ("EPSG:7910", "EPSG:7903", 2007.0, (4027894.006, 307045.600, 4919474.910),
         (4027894.0444, 307045.6209, 4919474.8613), 1e-4),
    ],
)  # fmt: skip
def test_old_frames(receiver: str, client: str, epoch: float, start, published, tolerance: float) -> None:
    """Onsala, ITRF2000 to ITRF93 (PROJ test suite), and the EPN tutorial's ITRF2005 to ITRF91 (carriers: tests of several
    libraries), by the gateway: 0.03 and 0.1 mm, the last printed digit."""
    choice = FrameChoice(receiver, client, receiver_epoch=epoch, client_epoch=epoch)
    found, operation = transform_to_client(choice, *geographic(start), 2027.2)
    assert found is not None
    assert operation_codes(operation)
    assert [found.x_m, found.y_m, found.z_m] == pytest.approx(published, abs=tolerance)


def test_three_coordinates_of_alice_springs() -> None:
    """GDA2020 Technical Manual v1.3: by seven parameters, by plate motion and recognised; spread 1.9, 6.2, 3.1 mm. None of
    them is wrong, and each of our tests names the one it is held against."""
    three = np.array([alic(name) for name in table_names() if name.startswith("GDA2020")])
    assert len(three) == 3
    assert 1000 * np.ptp(three, axis=0) == pytest.approx([1.9, 6.2, 3.1], abs=0.06)
    off = enu_of_xyz(three[1] - three[0], -23.67, 133.8855)
    assert 1e3 * float(np.linalg.norm(off)) < 8.0


def table_names() -> list[str]:
    return [row["case"] for row in table("gda2020_alic.csv")]


def test_print_with_rounded_radians() -> None:
    """IOGP 373-7-2, Lambert Texas, second print: E 2963503.95, N 254759.84 ft comes from parameters and place in radians
    rounded to eight digits: right for its own input (0.01 ft), 0.04 ft off 28 30 N, 96 W, and no check value there."""

    def rounded_deg(*angle: float) -> float:
        return math.degrees(round(math.radians(dms(*angle)), 8))

    def projected(of: Callable[..., float]) -> tuple[float, float]:
        lambert = Proj(proj="lcc", lat_0=of(27, 50, 0), lon_0=of(-99, 0, 0), lat_1=of(28, 23, 0), lat_2=of(30, 17, 0),
                       x_0=2000000.0, y_0=0.0, a=20925832.16, rf=294.97870)  # fmt: skip
        east, north = lambert(of(-96, 0, 0), of(28, 30, 0))
        return float(east), float(north)

    assert projected(rounded_deg) == pytest.approx((2963503.95, 254759.84), abs=0.01)
    assert projected(dms) == pytest.approx((2963503.91, 254759.80), abs=0.01)


def test_data_sheet_longitude_is_west() -> None:
    """NGS data sheet KG0640 prints 98 32 31.74540 (W): read as east it is a point in Asia, 7000 km away, and the frame's area
    of use refuses it."""
    from fieldbook.errors import ReductionError

    east = (dms(39, 13, 26.71220), dms(98, 32, 31.74540), 573.961)
    with pytest.raises(ReductionError) as refused:
        transform_to_client(FrameChoice("EPSG:7912", "EPSG:6319", receiver_epoch=2010.0), *east, 2027.2)
    assert refused.value.code == "outside_area"


# --- heights and centring (section 4) ---------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("slant_m", "radius_m", "above_m", "ds", "dr", "mistaken_mm"),
    [
        (1.8527, 0.1905, 0.0350, 1.00533, -0.10337, 9.8),
        (1.500, 0.100, 0.0, 1.00223, -0.06682, 3.3),
        (1.500, 0.170, 0.035, 1.00648, -0.11407, 9.7),
        (2.000, 0.0981, -0.040, 1.00121, -0.04911, 2.4),
    ],
)
def test_slant_sensitivities(
    slant_m: float, radius_m: float, above_m: float, ds: float, dr: float, mistaken_mm: float
) -> None:
    """dv/ds = s/v, dv/dr = -r/v and the error of a slant taken for vertical (first row: UNAVCO note of 2019; computed)."""

    def height(s: float, r: float) -> float:
        return arp_height_m("slant", s, Antenna(model="any", slant_radius_m=r, slant_mark_above_arp_m=above_m))

    step = 1e-5
    assert (height(slant_m + step, radius_m) - height(slant_m - step, radius_m)) / (2 * step) == pytest.approx(
        ds, abs=1e-5
    )
    assert (height(slant_m, radius_m + step) - height(slant_m, radius_m - step)) / (2 * step) == pytest.approx(
        dr, abs=1e-5
    )
    vertical = height(slant_m, radius_m) + above_m
    assert 1000 * (slant_m - vertical) == pytest.approx(mistaken_mm, abs=0.06)


@pytest.mark.parametrize(("bubble", "plan_mm"), [(8.0, 4.65), (10.0, 5.8), (20.0, 11.6), (30.0, 17.5), (40.0, 23.3)])
def test_bubble_of_a_two_metre_pole(bubble: float, plan_mm: float) -> None:
    """8 minutes on 2.0 m: 4.65 mm in plan, 0.005 mm in height (trigonometry). The budget takes the figure as half-width of a
    rectangular distribution on each axis."""
    from fieldbook.model.reduction import AntennaHeight
    from fieldbook.reduce.antenna import AntennaReduction
    from fieldbook.reduce.terms import setup_terms

    setup = Setup("ARP", "bipod", 0.001, support="pole", pole_length_m=2.0, bubble_arcmin=bubble)
    nothing = AntennaReduction(AntennaHeight(2.0, 0.001, "ARP"), (0.0, 0.0, -2.0))
    line = next(item for item in setup_terms(setup, nothing) if item.source == "levelling of the pole")
    assert line.distribution == "rectangular"
    assert 1000 * math.sqrt(3) * (line.u_enu_m[0] or 0.0) == pytest.approx(plan_mm, abs=0.06)
    assert line.u_enu_m[2] == 0.0
