"""Geodesy against published examples and an independent library.

Each test names source, edition, page (where seen) and tolerance. 'carrier': where the figure was read when the
document itself was not at hand.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from published_tables import alic, dms, epsg, table

from fieldbook.reduce.constants import GRS80, PLATE_ROTATIONS, WGS84
from fieldbook.reduce.geodesy import (
    Helmert,
    apply_helmert,
    covariance_to_enu,
    covariance_to_xyz,
    elevation_factor,
    enu_difference,
    enu_of_xyz,
    geocentric,
    geographic,
    mean_radius_m,
    meridian_radius_m,
    plate_velocity_m,
    prime_vertical_radius_m,
)

# --- geographic and geocentric ---------------------------------------------------------------------------------


def test_geocentric_of_guidance_note() -> None:
    """IOGP 373-7-2, method 9602 example (newer print, carrier: PHPCoord tests). Tolerance 0.6 mm: 3 decimals."""
    xyz = geocentric(dms(53, 48, 33.82), dms(2, 7, 46.38), 73.0, WGS84)
    assert xyz == pytest.approx([3771793.968, 140253.342, 5124304.349], abs=0.0006)


def test_geographic_of_guidance_note() -> None:
    """The same example reversed. Tolerance 1e-8 degree and 1 mm: the input is rounded to 1 mm."""
    lat, lon, height = geographic([3771793.968, 140253.342, 5124304.349], WGS84)
    assert (lat, lon) == pytest.approx((53.80939444, 2.12955000), abs=1e-8)
    assert height == pytest.approx(73.0, abs=0.001)


def test_topocentric_of_guidance_note() -> None:
    """IOGP 373-7-2, method 9837 example (from memory, high). Tolerance 1 mm."""
    offset = np.array([3771793.968, 140253.342, 5124304.349]) - geocentric(55.0, 5.0, 200.0, WGS84)
    assert enu_of_xyz(offset, 55.0, 5.0) == pytest.approx([-189013.869, -128642.040, -4220.171], abs=0.001)


def test_alice_springs_gda94_geocentric() -> None:
    """GDA2020 Technical Manual v1.3, 3.1.1, pages 26-27. Tolerance 0.1 mm: 4 decimals of a metre."""
    xyz = geocentric(dms(-23, 40, 12.446019), dms(133, 53, 7.847844), 603.3466)
    assert xyz == pytest.approx([-4052051.7643, 4212836.2017, -2545106.0245], abs=1e-4)


def test_meades_ranch_geocentric() -> None:
    """NGS data sheet KG0640, NAD83(2011) (second-hand). West longitude is negative: two libraries lost the letter."""
    xyz = geocentric(dms(39, 13, 26.71220), dms(-98, 32, 31.74540), 573.961)
    assert xyz == pytest.approx([-734972.563, -4893188.492, 4011982.811], abs=0.001)


def test_geographic_against_karney() -> None:
    """pygeodesy 26, EcefKarney (C. Karney's algorithm), 2000 random places, -11 km to 20000 km. Tolerance 0.001 mm."""
    karney = pytest.importorskip("pygeodesy").EcefKarney(6378137.0, 1 / 298.257222101)
    rng = np.random.default_rng(20270304)
    for _ in range(2000):
        lat, lon = math.degrees(math.asin(rng.uniform(-1, 1))), rng.uniform(-180, 180)
        height = rng.choice([rng.uniform(-11e3, 9e3), rng.uniform(0, 2e7)])
        xyz = geocentric(lat, lon, height)
        other = karney.reverse(*xyz)
        own = geographic(xyz)
        assert own[0] == pytest.approx(float(other.lat), abs=1e-11)
        assert own[2] == pytest.approx(float(other.height), abs=1e-6)
        assert geocentric(*own) == pytest.approx(xyz, abs=1e-6)


@pytest.mark.parametrize("lat", [90.0, -90.0, 89.9999999999, 0.0, 1e-13])
@pytest.mark.parametrize("height", [-5000.0, 0.0, 9000.0, 1e8])
def test_round_trip_at_awkward_places(lat: float, height: float) -> None:
    """No source: the pair closes. 0.01 mm (at 100000 km double precision itself is 0.015 micrometre)."""
    for lon in (-180.0, 0.0, 123.4, 179.9999999999):
        xyz = geocentric(lat, lon, height)
        back = geographic(xyz)
        assert geocentric(*back) == pytest.approx(xyz, abs=1e-5)
        assert -180.0 <= back[1] < 180.0


# --- ellipsoid and radii -----------------------------------------------------------------------------------------


def test_grs80_derived_constants() -> None:
    """Moritz, Geodetic Reference System 1980, Journal of Geodesy 74 (2000), pages 128-133 (from memory, high)."""
    assert pytest.approx(6356752.3141, abs=5e-5) == GRS80.b_m
    assert pytest.approx(0.00669438002290, abs=1e-14) == GRS80.e2
    assert pytest.approx(0.00673949677548, abs=1e-14) == GRS80.second_e2
    polar_radius = 6399593.6259  # c = a^2 / b: both radii of curvature at the pole
    assert meridian_radius_m(90.0) == pytest.approx(polar_radius, abs=1e-4)
    assert prime_vertical_radius_m(90.0) == pytest.approx(polar_radius, abs=1e-4)
    assert prime_vertical_radius_m(0.0) == 6378137.0


def test_elevation_factor() -> None:
    """GDA2020 Technical Manual v1.3, 5.1.1.2, page 46: 6.5 m of height is 1 ppm of distance. Tolerance 3 %: 6.5 is
    rounded. Exact: R / (R + h)."""
    change = elevation_factor(-37.0, 1000.0) - elevation_factor(-37.0, 1006.5)
    assert change == pytest.approx(1e-6, rel=0.03)
    radius = mean_radius_m(-37.0)
    assert elevation_factor(-37.0, 0.0) == 1.0
    assert elevation_factor(-37.0, 1000.0) == pytest.approx(radius / (radius + 1000.0), abs=1e-15)


# --- Helmert, both conventions ----------------------------------------------------------------------------------

WGS72 = (3657660.66, 255768.55, 5201382.11)
AS_WGS84 = [3657660.78, 255778.43, 5201387.75]


@pytest.mark.parametrize(("convention", "sign"), [("position vector", 1), ("coordinate frame", -1)])
def test_wgs72_to_wgs84(convention: str, sign: int) -> None:
    """IOGP 373-7-2, methods 9606 and 9607 (1033, 1032), examples (carriers: PHPCoord, SIS). Tolerance 6 mm: printed
    with two decimals."""
    helmert = Helmert((0, 0, 4.5), (0, 0, sign * 554.0), 219.0, convention)  # type: ignore[arg-type]
    assert apply_helmert(WGS72, helmert) == pytest.approx(AS_WGS84, abs=0.006)
    assert apply_helmert(apply_helmert(WGS72, helmert), helmert, inverse=True) == pytest.approx(WGS72, abs=1e-8)


def test_wrong_convention_is_twenty_metres_off() -> None:
    """The same figures read with the other sign: Y is 19.65 m wrong. The test above can tell them apart."""
    wrong = Helmert((0, 0, 4.5), (0, 0, 554.0), 219.0, "coordinate frame")
    assert apply_helmert(WGS72, wrong)[1] - AS_WGS84[1] == pytest.approx(-19.65, abs=0.01)


def test_helmert_great_britain() -> None:
    """Ordnance Survey guide to coordinate systems, worked example (carrier: PHPCoord). Tolerance 1 mm."""
    helmert = Helmert((-446.448, 125.157, -542.060), (-150.2, -247.0, -842.1), 20489.4, "position vector")
    found = apply_helmert((3909833.018, -147097.138, 5020322.478), helmert)
    assert found == pytest.approx([3909460.068, -146987.302, 5019888.070], abs=0.001)


def test_geocentric_translation() -> None:
    """IOGP 373-7-2, method 1031 example. Tolerance 1e-9: three additions."""
    helmert = Helmert((84.87, 96.49, 116.95), (0, 0, 0), 0.0, "position vector")
    found = apply_helmert((3771793.97, 140253.34, 5124304.35), helmert)
    assert found == pytest.approx([3771878.84, 140349.83, 5124421.30], abs=1e-8)


def test_time_specific_pz90() -> None:
    """IOGP 373-7-2, method 1066 example, PZ-90.11 to ITRF2008 at 2010.0 (carrier: PHPCoord). Tolerance 0.1 mm."""
    helmert = Helmert((-0.003, -0.001, 0.0), (0.019, -0.042, 0.002), 0.0, "coordinate frame")
    found = apply_helmert((2845455.9753, 2160954.3073, 5265993.2656), helmert)
    assert found == pytest.approx([2845455.9734, 2160954.3068, 5265993.2648], abs=1e-4)


def test_time_dependent_itrf2008_to_gda94() -> None:
    """IOGP 373-7-2, methods 1053 and 1056 example, epoch 2013.9 (newer print, carrier: PHPCoord). Tolerance 0.5 mm."""
    found = apply_helmert((-3789470.710, 4841770.404, -1690893.952), epsg("6276"), 2013.9)
    assert found == pytest.approx([-3789470.004, 4841770.686, -1690895.108], abs=0.0005)


def test_older_print_of_it_is_an_erratum() -> None:
    """The older note prints figures 11.8, 8.5, -3.0 mm off (known to SIS as 13, 9, 3 mm): must not be met."""
    found = apply_helmert((-3789470.702, 4841770.411, -1690893.950), epsg("6276"), 2013.9)
    off = found - np.array([-3789470.008, 4841770.685, -1690895.103])
    assert off * 1000.0 == pytest.approx([11.8, 8.5, -3.0], abs=0.6)


def test_dawson_and_woods() -> None:
    """Dawson and Woods, Journal of Applied Geodesy 4 (2010), Appendix A, ITRF2005 at 2010.4559 to GDA94. 0.1 mm."""
    start = geocentric(dms(-23, 40, 12.41482), dms(133, 53, 7.86712), 603.2562)
    found = apply_helmert(start, epsg("6277"), 2010.4559)
    assert found == pytest.approx([-4052051.7614, 4212836.1945, -2545106.0146], abs=3e-4)  # input: 5 decimals of "
    lat, lon, height = geographic(found)
    assert lat == pytest.approx(dms(-23, 40, 12.44582), abs=1e-5 / 3600)
    assert lon == pytest.approx(dms(133, 53, 7.84795), abs=1e-5 / 3600)
    assert height == pytest.approx(603.3361, abs=1e-4)


def test_helmert_without_epoch_is_refused() -> None:
    with pytest.raises(ValueError, match="epoch"):
        apply_helmert(WGS72, epsg("8049"))


# --- Australia ---------------------------------------------------------------------------------------------------


def test_gda94_to_gda2020() -> None:
    """GDA2020 Technical Manual v1.3, 3.1.1, pages 26-27, ALIC. Tolerance 0.1 mm."""
    found = apply_helmert(alic("GDA94 (3.1.1)"), epsg("8048"))
    assert found == pytest.approx(alic("GDA2020 by 7 parameters (3.1.1)"), abs=1e-4)
    lat, lon, height = geographic(found)
    assert lat == pytest.approx(dms(-23, 40, 12.39650), abs=0.5e-5 / 3600)
    assert lon == pytest.approx(dms(133, 53, 7.87779), abs=0.5e-5 / 3600)
    assert height == pytest.approx(603.2489, abs=1e-4)


def test_gda94_to_gda2020_wrong_sign() -> None:
    """With the position-vector sign the same figures are 3.62 m off: the convention is tested by the test above."""
    right = epsg("8048")
    wrong = Helmert(right.translation_m, right.rotation_mas, right.scale_ppb, "position vector")
    off = apply_helmert(alic("GDA94 (3.1.1)"), wrong) - np.array(alic("GDA2020 by 7 parameters (3.1.1)"))
    assert np.linalg.norm(off) == pytest.approx(3.62, abs=0.01)


def test_itrf2014_to_gda2020() -> None:
    """GDA2020 Technical Manual v1.3, 3.3.1, page 31, ALIC at 2018.0. Tolerance 0.1 mm."""
    found = apply_helmert(alic("ITRF2014 at 2018.0 (3.3.1)"), epsg("8049"), 2018.0)
    assert found == pytest.approx(alic("GDA2020 by plate motion (3.3.1)"), abs=1e-4)


def test_plate_motion_2018_to_2025() -> None:
    """ALIC in ATRF2014, GeodePy's test value; manual's rates. Tolerance 0.2 mm."""
    rates = (1.50379, 1.18346, 1.20716)  # table 3.3, pages 30-31, milliarc-seconds a year
    start = np.array(alic("ITRF2014 at 2018.0 (3.3.1)"))
    found = start + 7.0 * plate_velocity_m(start, rates)
    assert found == pytest.approx([-4052052.9336, 4212835.9577, -2545104.3168], abs=2e-4)


def test_plate_velocities_of_109_stations() -> None:
    """GDA2020 Technical Manual v1.3, Appendix A. Tolerance 0.050 mm/a (rounding of the print), plus 1e-6."""
    rows = list(table("gda2020_recognised_values.csv"))
    assert len(rows) == 109
    for row in rows:
        xyz = [float(row[axis]) for axis in "XYZ"]
        velocity = plate_velocity_m(xyz, (1.50379, 1.18346, 1.20716))
        assert velocity == pytest.approx([float(row[f"V{axis}"]) for axis in "XYZ"], abs=51e-6), row["site"]


def test_itrf_plate_models_against_109_stations() -> None:
    """Altamimi et al. 2017 and 2023 against the same velocities: at most 0.26 and 0.69 mm/a (own computation; the
    models' own figure is 0.2 to 0.3 mm/a, from memory). Pins the built-in rates and their sign."""
    for model, most in (("ITRF2014", 0.27e-3), ("ITRF2020", 0.70e-3)):
        for row in table("gda2020_recognised_values.csv"):
            xyz = [float(row[axis]) for axis in "XYZ"]
            velocity = plate_velocity_m(xyz, PLATE_ROTATIONS[model, "AUST"].rates_mas)
            assert velocity == pytest.approx([float(row[f"V{axis}"]) for axis in "XYZ"], abs=most), row["site"]


def test_built_in_plate_rates() -> None:
    """PROJ 9.5.1 resource files ITRF2014 and ITRF2020, all 24 plates: digit for digit."""
    rows = list(table("plate_motion_rates.csv"))
    assert len(rows) == len(PLATE_ROTATIONS) == 24
    for row in rows:
        rates = PLATE_ROTATIONS[row["model"], row["plate"]].rates_mas
        assert rates == (float(row["drx"]), float(row["dry"]), float(row["drz"]))


def test_brussels_velocity() -> None:
    """EUREF Technical Note 1, station velocity ITRF2014 -13.61 16.76 10.44 mm/a: the model within 0.35 mm/a."""
    velocity = plate_velocity_m(
        (4027893.6719, 307045.9064, 4919475.1704), PLATE_ROTATIONS["ITRF2014", "EURA"].rates_mas
    )
    assert velocity * 1000.0 == pytest.approx([-13.61, 16.76, 10.44], abs=0.35)


# --- Europe ------------------------------------------------------------------------------------------------------

TN1 = [
    ("ITRF2020", "ETRF2020", "10572"),
    ("ITRF2020", "ETRF2020", "10573"),
    ("ITRF2020", "ETRF2014", "10587"),
    ("ITRF2020", "ETRF2000", "10586"),
    ("ITRF2014", "ITRF2020", "9991"),
    ("ITRF2014", "ETRF2020", "10574"),
    ("ITRF2014", "ETRF2014", "8366"),
    ("ITRF2014", "ETRF2014", "8880"),
    ("ITRF2014", "ETRF2000", "8405"),
    ("ITRF2000", "ETRF2000", "7940"),
    ("ITRF2000", "ETRF2000", "7941"),
]


@pytest.mark.parametrize(("source", "target", "code"), TN1)
@pytest.mark.parametrize("epoch", [2010.0, 2020.0])
def test_euref_technical_note(source: str, target: str, code: str, epoch: float) -> None:
    """EUREF Technical Note 1 (Altamimi, 31 January 2024), examples 1 and 2 (carrier: PyGeodesy tests), both ways.
    Tolerance 0.1 mm (the print rounds to 0.1 mm; largest found 0.08)."""
    station = {
        row["frame"]: [float(row[axis]) for axis in "XYZ"]
        for row in table("euref_tn1_examples.csv")
        if float(row["epoch"]) == epoch
    }
    assert apply_helmert(station[source], epsg(code), epoch) == pytest.approx(station[target], abs=1e-4)
    back = apply_helmert(station[target], epsg(code), epoch, inverse=True)
    assert back == pytest.approx(station[source], abs=1e-4)


@pytest.mark.parametrize(
    ("code", "expected"),
    [
        ("8405", [4027894.3662, 307045.2530, 4919474.6263]),
        ("7940", [4027894.3559, 307045.2508, 4919474.6447]),
        ("7941", [4027894.3559, 307045.2508, 4919474.6447]),
    ],
)
def test_epn_tutorial(code: str, expected: list[float]) -> None:
    """EPN coordinate transformation tutorial, 2012.0 (carriers: tests of several libraries). Tolerance 0.1 mm."""
    found = apply_helmert((4027894.006, 307045.600, 4919474.910), epsg(code), 2012.0)
    assert found == pytest.approx(expected, abs=1e-4)


def test_itrf2014_to_etrf2014_proj() -> None:
    """PROJ test suite, EPSG:8366 at 2020.5. Tolerance 0.1 mm."""
    found = apply_helmert((3541657.3778, 948984.2343, 5201383.5231), epsg("8366"), 2020.5)
    assert found == pytest.approx([3541657.9112, 948983.7503, 5201383.2482], abs=1e-4)


@pytest.mark.parametrize(
    ("code", "source", "target"),
    [
        ("10586", "ITRF2020", "ETRF2000"),
        ("10572", "ITRF2020", "ETRF2020"),
        ("8405", "ITRF2014", "ETRF2000"),
        ("8970", "ITRF2014", "NAD83"),
        ("10334", "ITRF2020", "NAD83"),
        ("7807", "ITRF2008", "NAD83"),
    ],
)
def test_helmert_against_pygeodesy(code: str, source: str, target: str) -> None:
    """pygeodesy 26 as independent library, Frankfurt and Kansas at 2027.2. Tolerance 0.01 mm.

    Not used for ITRF2020 to ETRF2014 (5 mm off EUREF TN 1) nor for GDA2020 and GDA94 (0.96 m, the wrong way).
    """
    trf = pytest.importorskip("pygeodesy.trf")
    cartesian = pytest.importorskip("pygeodesy.ellipsoidalNvector").Cartesian
    place = (39.22, -98.54, 570.0) if target == "NAD83" else (50.1, 8.7, 150.0)
    start = geocentric(*place)
    other = cartesian(*start, reframe=trf.RefFrames[source], epoch=2027.2).toRefFrame(
        trf.RefFrames[target], epoch=2027.2
    )
    assert apply_helmert(start, epsg(code), 2027.2) == pytest.approx([other.x, other.y, other.z], abs=1e-5)


# --- covariance --------------------------------------------------------------------------------------------------


def test_covariance_rotation() -> None:
    """No source; two ways: at 0 N 0 E the axes are named (X up, Y east, Z north), and at Alice Springs a cloud made in
    east, north, up and carried through geocentric coordinates has the same covariance. Tolerance 1e-15 and 2 %."""
    xyz = np.array([[9.0, 1.0, 2.0], [1.0, 4.0, 0.5], [2.0, 0.5, 1.0]])
    enu = covariance_to_enu(xyz, 0.0, 0.0)
    assert enu == pytest.approx(np.array([[4.0, 0.5, 1.0], [0.5, 1.0, 2.0], [1.0, 2.0, 9.0]]), abs=1e-15)
    start = (-23.67, 133.885, 600.0)
    wanted = np.array([[4e-4, 1e-4, 0.0], [1e-4, 9e-4, -2e-4], [0.0, -2e-4, 2.5e-3]])
    cloud = np.random.default_rng(7).multivariate_normal([0, 0, 0], covariance_to_xyz(wanted, *start[:2]), 40_000)
    origin = geocentric(*start)
    offsets = np.array([enu_difference(start, geographic(origin + point)) for point in cloud[:4000]])
    assert np.cov(offsets.T) == pytest.approx(np.cov(enu_of_xyz(cloud[:4000], *start[:2]).T), rel=1e-4, abs=1e-9)
    assert covariance_to_enu(np.cov(cloud.T), *start[:2]) == pytest.approx(wanted, rel=0.03, abs=2e-5)
    assert covariance_to_enu(covariance_to_xyz(wanted, *start[:2]), *start[:2]) == pytest.approx(wanted, abs=1e-18)
