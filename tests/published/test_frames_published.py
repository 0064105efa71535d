"""The gateway against published coordinates and independent code: PROJ called with the right operation and epoch."""

from __future__ import annotations

import numpy as np
import pytest
from published_tables import alic, dms, epsg, table

from fieldbook.model.session import FrameChoice, Motion
from fieldbook.reduce.constants import PLATE_ROTATIONS
from fieldbook.reduce.frames import operation_codes, transform_to_client
from fieldbook.reduce.geodesy import apply_helmert, geocentric, geographic, plate_velocity_m

NAMES = {"ITRF2020": "9989", "ITRF2014": "7912", "ITRF2000": "7909"}
ETRF = {"ETRF2020": "10570", "ETRF2014": "8403", "ETRF2000": "7931"}


def test_gda94_to_gda2020_manual() -> None:
    """GDA2020 Technical Manual v1.3, 3.1.1, pages 26-27, ALIC, by EPSG:8048. Tolerance 0.1 mm and 0.000005"."""
    place = dms(-23, 40, 12.446019), dms(133, 53, 7.847844), 603.3466
    client, operation = transform_to_client(FrameChoice("EPSG:4939", "EPSG:7843"), *place, 2027.2)
    assert client is not None
    assert operation_codes(operation) == ["EPSG:8048"]
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx(alic("GDA2020 by 7 parameters (3.1.1)"), abs=1e-4)
    assert client.lat_deg == pytest.approx(dms(-23, 40, 12.39650), abs=0.5e-5 / 3600)
    assert client.lon_deg == pytest.approx(dms(133, 53, 7.87779), abs=0.5e-5 / 3600)
    assert client.h_m == pytest.approx(603.2489, abs=1e-4)
    assert client.epoch is None
    assert operation.shift_enu_m == pytest.approx([0.8487, 1.5236, -0.0977], abs=1e-4)


def test_itrf2014_to_gda2020_manual() -> None:
    """GDA2020 Technical Manual v1.3, 3.3.1, page 31, ALIC at 2018.0, by EPSG:8049. Tolerance 0.1 mm."""
    place = geographic(alic("ITRF2014 at 2018.0 (3.3.1)"))
    choice = FrameChoice("EPSG:7912", "EPSG:7843", receiver_epoch=2018.0)
    client, operation = transform_to_client(choice, *place, 2027.2)
    assert client is not None
    assert operation.coordinate_epoch == 2018.0
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx(alic("GDA2020 by plate motion (3.3.1)"), abs=1e-4)


@pytest.mark.parametrize("source", list(NAMES))
@pytest.mark.parametrize("target", list(ETRF))
@pytest.mark.parametrize("epoch", [2010.0, 2020.0])
def test_euref_technical_note(source: str, target: str, epoch: float) -> None:
    """EUREF Technical Note 1 (Altamimi, 31 January 2024), examples 1 and 2: every ITRF of the table to every ETRF at
    both epochs. Tolerance 0.15 mm: 0.1 mm of rounding at each end, 0.08 found."""
    station = {
        row["frame"]: [float(row[axis]) for axis in "XYZ"]
        for row in table("euref_tn1_examples.csv")
        if float(row["epoch"]) == epoch
    }
    choice = FrameChoice(f"EPSG:{NAMES[source]}", f"EPSG:{ETRF[target]}", receiver_epoch=epoch)
    client, _ = transform_to_client(choice, *geographic(station[source]), 2027.2)
    assert client is not None
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx(station[target], abs=1.5e-4)


def test_meades_ranch_at_two_epochs() -> None:
    """NGS data sheet KG0640, taken to ITRF2014 by own code, PROJ and pygeodesy (no published figure). Back by the
    gateway at the same epoch: tolerance 0.1 mm; ITRF2014 to NAD83(2011) by EPSG:8970."""
    for epoch, xyz in (
        (2010.0, [-734973.31649, -4893187.14070, 4011982.71461]),
        (2025.0, [-734973.56839, -4893187.15370, 4011982.67634]),
    ):
        choice = FrameChoice("EPSG:7912", "EPSG:6319", receiver_epoch="observation")
        client, operation = transform_to_client(choice, *geographic(xyz), epoch)
        assert client is not None
        assert operation_codes(operation) == ["EPSG:8970"]
        assert operation.accuracy_m == 0.0
        assert [client.x_m, client.y_m, client.z_m] == pytest.approx([-734972.563, -4893188.492, 4011982.811], abs=6e-4)


@pytest.mark.parametrize(
    ("receiver", "client_code", "chain", "place"),
    [
        ("EPSG:9989", "EPSG:7843", [("9991", True), ("8049", False)], (-23.67, 133.885, 600.0)),
        ("EPSG:7911", "EPSG:7843", [("7790", False), ("8049", False)], (-23.67, 133.885, 600.0)),
        ("EPSG:9989", "EPSG:6319", [("10334", False)], (39.22, -98.54, 570.0)),
        ("EPSG:7911", "EPSG:7931", [("7951", False)], (50.1, 8.7, 150.0)),
        ("EPSG:7931", "EPSG:10570", [("10586", True), ("10572", False)], (50.1, 8.7, 150.0)),
        ("EPSG:7911", "EPSG:4939", [("6276", False)], (-23.67, 133.885, 600.0)),
    ],
)
def test_own_helmert_chain(
    receiver: str, client_code: str, chain: list[tuple[str, bool]], place: tuple[float, float, float]
) -> None:
    """Our own linear Helmert with the parameters of the recorded codes, at 2027.2. Tolerance 0.05 mm."""
    choice = FrameChoice(receiver, client_code, receiver_epoch=2027.2)
    client, operation = transform_to_client(choice, *place, 2027.2)
    assert client is not None
    assert operation_codes(operation) == [f"EPSG:{code}" + (" inverse" if back else "") for code, back in chain]
    xyz = geocentric(*place)
    for code, back in chain:
        xyz = apply_helmert(xyz, epsg(code), 2027.2, inverse=back)
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx(xyz.tolist(), abs=5e-5)


@pytest.mark.parametrize(
    ("receiver", "client_code", "names", "place"),
    [
        ("EPSG:9989", "EPSG:7931", ("ITRF2020", "ETRF2000"), (50.1, 8.7, 150.0)),
        ("EPSG:9989", "EPSG:10570", ("ITRF2020", "ETRF2020"), (50.1, 8.7, 150.0)),
        ("EPSG:9989", "EPSG:6319", ("ITRF2020", "NAD83"), (39.22, -98.54, 570.0)),
        ("EPSG:7912", "EPSG:7931", ("ITRF2014", "ETRF2000"), (50.1, 8.7, 150.0)),
        ("EPSG:7911", "EPSG:6319", ("ITRF2008", "NAD83"), (39.22, -98.54, 570.0)),
    ],
)
def test_pygeodesy(receiver: str, client_code: str, names: tuple[str, str], place: tuple[float, float, float]) -> None:
    """pygeodesy 26 as independent library. Tolerance 0.05 mm. Not asked: ITRF2020 to ETRF2014 (5 mm off EUREF TN 1) and
    GDA2020, GDA94 (0.96 m, the wrong way)."""
    trf = pytest.importorskip("pygeodesy.trf")
    cartesian = pytest.importorskip("pygeodesy.ellipsoidalNvector").Cartesian
    source, target = (trf.RefFrames[name] for name in names)
    other = cartesian(*geocentric(*place), reframe=source, epoch=2027.2).toRefFrame(target, epoch=2027.2)
    client, _ = transform_to_client(FrameChoice(receiver, client_code, receiver_epoch=2027.2), *place, 2027.2)
    assert client is not None
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx([other.x, other.y, other.z], abs=5e-5)


# --- plate motion between epochs of moving frames ------------------------------------------------------------------

AUST = Motion(model="ITRF2020", plate="AUST", sigma_m_per_year=0.0003)


def test_motion_against_own_arithmetic_and_pyproj() -> None:
    """ITRF2020 at 2027.2 to ITRF2020 at 2020.0 with the ITRF2020 plate AUST: PROJ's own init file as witness (its
    +t_epoch is the epoch the coordinates have, the time handed over the one they shall have). Tolerance 0.01 mm."""
    pyproj = pytest.importorskip("pyproj")
    place = (-23.67, 133.885, 600.0)
    choice = FrameChoice("EPSG:9989", "EPSG:9989", receiver_epoch=2027.2, client_epoch=2020.0, motion=(AUST,))
    client, operation = transform_to_client(choice, *place, 2027.2)
    assert client is not None
    assert client.epoch == 2020.0
    assert operation_codes(operation) == ["motion:ITRF2020 AUST"]
    assert operation.accuracy_m == pytest.approx(7.2 * 0.0003)
    pipeline = pyproj.Transformer.from_pipeline(
        "+proj=pipeline +step +proj=unitconvert +xy_in=deg +xy_out=rad +step +proj=cart +ellps=GRS80 "
        "+step +init=ITRF2020:AUST +t_epoch=2027.2 +step +inv +proj=cart +ellps=GRS80 "
        "+step +proj=unitconvert +xy_in=rad +xy_out=deg"
    )
    lon, lat, height, _ = pipeline.transform(place[1], place[0], place[2], 2020.0, errcheck=True)
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx(geocentric(lat, lon, height).tolist(), abs=1e-5)


def test_stated_velocity() -> None:
    """GDA2020 manual's recognised velocity of Alice Springs, -0.0393 -0.0052 0.0540 m/a: from 2027.2 to 2020.0 it moves
    the mark by E -229.9 N -424.0 U +1.2 mm (own computation). Tolerance 0.1 mm."""
    motion = Motion(
        velocity_m_per_year=(-0.0393, -0.0052, 0.0540), sigma_m_per_year=0.0002, source="manual v1.3, App. A"
    )
    choice = FrameChoice("EPSG:7912", "EPSG:7912", receiver_epoch=2027.2, client_epoch=2020.0, motion=(motion,))
    _, operation = transform_to_client(choice, -23.67, 133.885, 600.0, 2027.2)
    assert operation.shift_enu_m is not None
    assert np.array(operation.shift_enu_m) * 1000.0 == pytest.approx([-229.9, -424.0, 1.2], abs=0.1)
    assert operation.steps[0].remark == "standard uncertainty 0.2 mm a year over 7.20 years; manual v1.3, App. A"


def test_motion_and_then_another_frame() -> None:
    """Motion in the receiver's frame first, the frames meet at the client's epoch: ITRF2020 at 2027.2 to ITRF2014 at
    2020.0 by own arithmetic. Tolerance 0.05 mm."""
    place = (-23.67, 133.885, 600.0)
    choice = FrameChoice("EPSG:9989", "EPSG:7912", receiver_epoch="observation", client_epoch=2020.0, motion=(AUST,))
    client, operation = transform_to_client(choice, *place, 2027.2)
    assert client is not None
    assert operation.coordinate_epoch == 2020.0
    assert operation_codes(operation) == ["motion:ITRF2020 AUST", "EPSG:9991 inverse"]
    xyz = geocentric(*place)
    moved = xyz - 7.2 * plate_velocity_m(xyz, PLATE_ROTATIONS["ITRF2020", "AUST"].rates_mas)
    wanted = apply_helmert(moved, epsg("9991"), 2020.0, inverse=True)
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx(wanted.tolist(), abs=5e-5)


def test_euref_station_carried_ten_years() -> None:
    """EUREF Technical Note 1, station in ITRF2020 at 2010.0 and 2020.0. By its own published velocity: 0.1 mm (print 0.05
    mm a coordinate and 0.005 mm a year); by ITRF2020 EURA 1.1, 1.3, 2.3 mm, which is what a plate model can do in 10 years
    (0.3 mm a year and axis)."""
    station = {
        float(row["epoch"]): [float(row[axis]) for axis in "XYZ"]
        for row in table("euref_tn1_examples.csv")
        if row["frame"] == "ITRF2020"
    }
    own = Motion(velocity_m_per_year=(-0.01361, 0.01686, 0.01024), sigma_m_per_year=0.0001, source="EUREF TN 1")
    plate = Motion(model="ITRF2020", plate="EURA", sigma_m_per_year=0.0003)
    for motion, most in ((own, 1.5e-4), (plate, 2.4e-3)):
        choice = FrameChoice("EPSG:9989", "EPSG:9989", receiver_epoch=2010.0, client_epoch=2020.0, motion=(motion,))
        client, operation = transform_to_client(choice, *geographic(station[2010.0]), 2027.2)
        assert client is not None
        assert [client.x_m, client.y_m, client.z_m] == pytest.approx(station[2020.0], abs=most)
        assert operation.coordinate_epoch == 2020.0


def test_alice_springs_carried_seven_years() -> None:
    """ALIC, ITRF2014 at 2018.0 to 2025.0: GeodePy's test value by the manual's rates. ITRF2014 AUST within 1.0, 0.6, 0.6 mm;
    tolerance 1.1 mm. The wrong direction would be 0.94 m off."""
    motion = Motion(model="ITRF2014", plate="AUST", sigma_m_per_year=0.0003)
    choice = FrameChoice("EPSG:7912", "EPSG:7912", receiver_epoch=2018.0, client_epoch=2025.0, motion=(motion,))
    client, _ = transform_to_client(choice, *geographic(alic("ITRF2014 at 2018.0 (3.3.1)")), 2027.2)
    assert client is not None
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx(
        [-4052052.9336, 4212835.9577, -2545104.3168], abs=1.1e-3
    )


@pytest.mark.parametrize(("model", "code"), [("ITRF2014", "EPSG:7912"), ("ITRF2020", "EPSG:9989")])
def test_every_plate_against_proj(model: str, code: str) -> None:
    """PROJ's own resource files as witness, all plates, one place on each side of the globe, 7.2 years. 0.01 mm."""
    pyproj = pytest.importorskip("pyproj")
    for plate in (name for owner, name in PLATE_ROTATIONS if owner == model):
        pipeline = pyproj.Transformer.from_pipeline(f"+proj=pipeline +step +init={model}:{plate} +t_epoch=2027.2")
        for place in ((-23.67, 133.885, 600.0), (64.1, -21.9, 100.0)):
            motion = Motion(model=model, plate=plate, sigma_m_per_year=0.0003)
            choice = FrameChoice(code, code, receiver_epoch=2027.2, client_epoch=2020.0, motion=(motion,))
            client, _ = transform_to_client(choice, *place, 2027.2)
            assert client is not None
            x, y, z, _ = pipeline.transform(*geocentric(*place), 2020.0, errcheck=True)
            assert [client.x_m, client.y_m, client.z_m] == pytest.approx([x, y, z], abs=1e-5), plate


def test_origin_rate_bias_is_left_out() -> None:
    """EUREF Technical Note 1, published ITRF2020 velocity -13.61 16.86 10.24 mm/a: the model is 0.29 mm/a from it, with the
    bias of the 2023 paper's table 2 (0.37 0.35 0.74) 0.73 mm/a. So the bias stays out."""
    xyz = (4027893.6750, 307045.9069, 4919475.1721)
    published = np.array([-13.61, 16.86, 10.24])
    model = 1000.0 * plate_velocity_m(xyz, PLATE_ROTATIONS["ITRF2020", "EURA"].rates_mas)
    without, bias = np.linalg.norm(model - published), np.array([0.37, 0.35, 0.74])
    assert without == pytest.approx(0.29, abs=0.01)
    assert np.linalg.norm(model + bias - published) == pytest.approx(0.73, abs=0.03)


def test_brasilia_to_the_epoch_of_its_frame() -> None:
    """ITRF2020 at 2027.2 at Brasilia to ITRF2000 at 2000.4 with SOAM: E +116.9 N -326.6 U +5.6 mm (own computation of
    this project, PROJ 9.5.1). Tolerance 0.1 mm; at 1 mm a year its own figure is 27 mm."""
    motion = Motion(model="ITRF2020", plate="SOAM", sigma_m_per_year=0.001)
    choice = FrameChoice("EPSG:9989", "EPSG:7909", receiver_epoch=2027.2, client_epoch=2000.4, motion=(motion,))
    _, operation = transform_to_client(choice, -15.8, -47.9, 1100.0, 2027.2)
    assert operation.shift_enu_m is not None
    assert np.array(operation.shift_enu_m) * 1000.0 == pytest.approx([116.9, -326.6, 5.6], abs=0.1)
    assert operation.steps[0].accuracy_m == pytest.approx(0.0268, abs=1e-6)
