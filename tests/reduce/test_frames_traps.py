"""Each way in which PROJ answers wrongly without a word, as a case that must not pass."""

from __future__ import annotations

import math
import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path

import pytest
from pyproj import Transformer, network
from pyproj.enums import TransformDirection

from fieldbook.errors import ExitCode, ReductionError
from fieldbook.model.session import FrameChoice, Motion, TakenAs
from fieldbook.reduce.frames import (
    OperationChanged,
    ellipsoidal_height_difference_to_itrf2020,
    operation_codes,
    transform_to_client,
)
from fieldbook.reduce.frames import candidates as judge

EPOCH = 2027.2
ROOT = Path(__file__).parents[2]
ALICE = (-23.67, 133.885, 600.0)
SAMPLE = FrameChoice("EPSG:7912", "EPSG:7843", receiver_epoch="observation")


def refused(choice: FrameChoice, *place: float | None, **decisions: object) -> ReductionError:
    with pytest.raises(ReductionError) as error:
        transform_to_client(choice, *place, EPOCH, **decisions)  # type: ignore[arg-type]
    assert error.value.exit_code == ExitCode.REDUCTION
    assert error.value.remedy
    return error.value


# --- what PROJ does by itself -------------------------------------------------------------------------------


def test_proj_alone_returns_wgs84_unchanged() -> None:
    """The reason for all of this: 10605 to 7843 by from_crs, ballpark forbidden, best only: input unchanged."""
    transformer = Transformer.from_crs("EPSG:10605", "EPSG:7843", always_xy=True, allow_ballpark=False, only_best=True)
    lon, lat, height, _ = transformer.transform(133.885, -23.67, 600.0, EPOCH, errcheck=True)
    assert (lon, lat, height) == pytest.approx((133.885, -23.67, 600.0), abs=1e-9)
    choice = FrameChoice("EPSG:10605", "EPSG:7843", receiver_epoch="observation")
    _, operation = transform_to_client(choice, *ALICE, EPOCH)
    assert operation.shift_enu_m == pytest.approx([-0.2270, -0.4204, -0.0037], abs=2e-4)
    assert operation_codes(operation) == ["EPSG:10608", "EPSG:9991 inverse", "EPSG:8049"]


def test_epoch_omitted_moves_nothing_in_proj() -> None:
    """7912 to 7843 without a time returns the input; the gateway has no call without one."""
    transformer = Transformer.from_crs("EPSG:7912", "EPSG:7843", always_xy=True)
    assert transformer.transform(133.885, -23.67, 600.0) == pytest.approx((133.885, -23.67, 600.0), abs=1e-8)
    client, operation = transform_to_client(SAMPLE, *ALICE, EPOCH)
    assert client is not None
    assert operation.coordinate_epoch == EPOCH
    assert math.hypot(*(operation.shift_enu_m or [])[:2]) == pytest.approx(0.482, abs=0.001)


def test_network_is_off_whatever_the_environment_says() -> None:
    assert not network.is_network_enabled()
    code = "import fieldbook.reduce.frames, pyproj.network as n; raise SystemExit(int(n.is_network_enabled()))"
    done = subprocess.run([sys.executable, "-c", code], env={"PROJ_NETWORK": "ON", "PATH": ""}, cwd=ROOT, check=False)
    assert done.returncode == 0


# --- identity ------------------------------------------------------------------------------------------


def test_identity_computes_nothing() -> None:
    client, operation = transform_to_client(FrameChoice("EPSG:7843", "EPSG:7843"), *ALICE, EPOCH)
    assert client is not None
    assert (client.lat_deg, client.lon_deg, client.h_m) == ALICE
    assert (operation.steps, operation.accuracy_m, operation.shift_enu_m) == ([], 0.0, [0.0, 0.0, 0.0])
    assert operation.area_ok
    moving = FrameChoice("EPSG:7912", "EPSG:7912", receiver_epoch="observation", client_epoch="observation")
    client, operation = transform_to_client(moving, *ALICE, EPOCH)
    assert client is not None
    assert client.epoch == EPOCH
    assert operation.steps == []


def test_identity_outside_the_area_is_refused_too() -> None:
    choice = FrameChoice("EPSG:7843", "EPSG:7843")
    assert refused(choice, 51.5, -0.1, 50.0).code == "outside_area"
    client, operation = transform_to_client(choice, 51.5, -0.1, 50.0, EPOCH, outside_area_accepted=True)
    assert client is not None
    assert not operation.area_ok


def test_unknown_height() -> None:
    """Identity keeps a position without height; between frames there is no client, but the operation is known."""
    client, _ = transform_to_client(FrameChoice("EPSG:7843", "EPSG:7843"), -23.67, 133.885, None, EPOCH)
    assert client is not None
    assert (client.h_m, client.x_m, client.y_m, client.z_m) == (None, None, None, None)
    client, operation = transform_to_client(SAMPLE, -23.67, 133.885, None, EPOCH)
    assert client is None
    assert operation_codes(operation) == ["EPSG:8049"]
    assert operation.shift_enu_m is None


# --- places ------------------------------------------------------------------------------------------


def test_out_of_area() -> None:
    """London to GDA2020: PROJ gives plausible figures; refused, and with a decision given and marked."""
    assert refused(SAMPLE, 51.5, -0.1, 50.0).code == "outside_area"
    assert refused(FrameChoice("EPSG:7912", "EPSG:6319", receiver_epoch=EPOCH), 50.1, 8.7, 150.0).code == "outside_area"
    client, operation = transform_to_client(SAMPLE, 51.5, -0.1, 50.0, EPOCH, outside_area_accepted=True)
    assert client is not None
    assert not operation.area_ok
    assert operation_codes(operation) == ["EPSG:8049"]


def test_receiver_outside_its_own_area() -> None:
    choice = FrameChoice("EPSG:7843", "EPSG:9989", client_epoch=EPOCH)
    assert refused(choice, 51.5, -0.1, 50.0).code == "outside_area"


@pytest.mark.parametrize(
    "place", [(91.0, 0.0, 0.0), (math.nan, 0.0, 0.0), (0.0, math.inf, 0.0), (0.0, 0.0, math.nan), (0.0, 600.0, 0.0)]
)
def test_no_place_on_earth(place: tuple[float, float, float]) -> None:
    choice = FrameChoice("EPSG:9989", "EPSG:7912", receiver_epoch=EPOCH, client_epoch=EPOCH)
    assert refused(choice, *place).code == "no_position"


@pytest.mark.parametrize("lat", [90.0, -90.0, 89.9999999])
def test_poles(lat: float) -> None:
    choice = FrameChoice("EPSG:9989", "EPSG:7912", receiver_epoch=EPOCH, client_epoch=EPOCH)
    client, operation = transform_to_client(choice, lat, 123.4, 2800.0, EPOCH)
    assert client is not None
    assert operation.shift_enu_m is not None
    assert math.hypot(*operation.shift_enu_m) < 0.02
    assert -180.0 <= client.lon_deg < 180.0


def test_antimeridian_and_longitudes_beyond_it() -> None:
    """180, -180 and 540 are one point; 190 is brought back before the area test. Fiji side of ITRF2020 to ITRF2014."""
    choice = FrameChoice("EPSG:9989", "EPSG:7912", receiver_epoch=EPOCH, client_epoch=EPOCH)
    found = [transform_to_client(choice, -17.0, lon, 20.0, EPOCH)[0] for lon in (180.0, -180.0, 540.0)]
    assert found[0] == found[1] == found[2]
    nzgd = FrameChoice("EPSG:4959", "EPSG:4959")  # area of use with west > east
    for lon in (174.8, -176.5, 183.5):
        client, operation = transform_to_client(nzgd, -41.3, lon, 100.0, EPOCH)
        assert client is not None
        assert operation.area_ok
        assert -180.0 <= client.lon_deg < 180.0
    assert refused(nzgd, -41.3, 0.0, 100.0).code == "outside_area"


def test_static_receiver_moving_client() -> None:
    """Back and forth closes, and the epoch of the client is printed with it. 0.1 mm."""
    back = FrameChoice("EPSG:7843", "EPSG:7912", client_epoch="observation")
    there, _ = transform_to_client(SAMPLE, *ALICE, EPOCH)
    assert there is not None
    client, operation = transform_to_client(back, there.lat_deg, there.lon_deg, there.h_m, EPOCH)
    assert client is not None
    assert operation_codes(operation) == ["EPSG:8049 inverse"]
    assert client.epoch == operation.coordinate_epoch == EPOCH
    assert (client.lat_deg, client.lon_deg) == pytest.approx(ALICE[:2], abs=1e-9)
    assert client.h_m == pytest.approx(600.0, abs=1e-4)


# --- grids, limits, decisions -------------------------------------------------------------------------------


def test_missing_grid_stops_the_search() -> None:
    """NAD83(CSRS) v4 to v7: the route round the velocity grid leaves out the epochs 2002 to 2010, up to 8 cm."""
    error = refused(FrameChoice("EPSG:8244", "EPSG:8254"), 49.9, -97.2, 230.0)
    assert error.code == "grid_missing"
    assert "ca_nrc_NAD83v70VG.tif" in error.text


def test_a_decision_may_go_round_a_missing_grid() -> None:
    """The operator's recorded steps, by ITRF96, are sound; they only are not what the search may choose by itself."""
    choice = FrameChoice("EPSG:8244", "EPSG:8254")
    steps = ["EPSG:8261 inverse", "EPSG:8078", "EPSG:8265"]
    by_hand = {"keep_steps": steps}
    with pytest.raises(ReductionError) as error:
        transform_to_client(choice, 49.9, -97.2, 230.0, EPOCH, keep_steps=["EPSG:1"])
    assert error.value.code == "grid_missing"
    _, operation = transform_to_client(choice, 49.9, -97.2, 230.0, EPOCH, **by_hand)  # type: ignore[arg-type]
    assert operation_codes(operation) == steps


def test_missing_grid_behind_a_pivot_is_named() -> None:
    choice = FrameChoice("EPSG:10605", "EPSG:4959", receiver_epoch=EPOCH)
    assert "nz_linz_nzgd2000" in refused(choice, -41.3, 174.8, 100.0).text


def test_accuracy_over_the_limit_needs_a_decision() -> None:
    """ETRF2000 by way of DREF91/2016 taken as something worse: 0.1 m stated plus 0.15 m declared is over 0.2 m."""
    equality = TakenAs("EPSG:10283", "EPSG:7931", "invented note", 0.25)
    choice = FrameChoice("EPSG:9989", "EPSG:10283", receiver_epoch=EPOCH, taken_as=(equality,))
    error = refused(choice, 50.1, 8.7, 150.0)
    assert error.code == "accuracy_over_limit"
    assert "0.250 m" in error.text
    client, operation = transform_to_client(choice, 50.1, 8.7, 150.0, EPOCH, accuracy_over_limit=True)
    assert client is not None
    assert operation.accuracy_m == pytest.approx(0.25)


def test_a_decision_does_not_worsen_the_choice() -> None:
    """G1762 to GDA94: 9686 inverse states 0.25 m; by ITRF2008 it is 0.04 m, also when 0.25 m were accepted."""
    choice = FrameChoice("EPSG:7665", "EPSG:4939", receiver_epoch=EPOCH)
    _, operation = transform_to_client(choice, *ALICE, EPOCH, accuracy_over_limit=True)
    assert operation_codes(operation) == ["EPSG:7666", "EPSG:6276"]


def test_decision_opens_only_the_limit() -> None:
    """Null copies through an ensemble stay refused whatever accuracy is accepted (France, WGS 84 to RGF93 v2b)."""
    choice = FrameChoice("EPSG:10605", "EPSG:9781", receiver_epoch=EPOCH)
    error = refused(choice, 45.75, 4.85, 220.0, accuracy_over_limit=True)
    assert "ensemble" in error.text


def test_decision_for_the_area_changes_nothing_inside() -> None:
    """Given for the grid's zone, say, it must not widen the search for operations at a mark inside its frames."""
    assert transform_to_client(SAMPLE, *ALICE, EPOCH, outside_area_accepted=True) == transform_to_client(
        SAMPLE, *ALICE, EPOCH
    )


def test_route_of_a_session_under_way_stays_cached() -> None:
    """Millimetres and minutes later the search is not made again (from a WGS 84 realisation it takes 0.4 s)."""
    choice = FrameChoice("EPSG:10605", "EPSG:7843", receiver_epoch="observation")
    transform_to_client(choice, -23.67011, 133.88512, 600.0, 2027.17102)
    before = judge.offer.cache_info().misses
    for second in range(20):
        later = 2027.17102 + second / 31_536_000
        transform_to_client(choice, -23.67011 + 1e-9 * second, 133.88512, 600.0, later)
    assert judge.offer.cache_info().misses == before


# --- equalities ------------------------------------------------------------------------------------------


def test_igs_frames_are_their_itrf() -> None:
    """EPSG 10179, 9381, 9032, 9031, 9031 + 9037: all-zero parameters, recorded and not called."""
    for receiver, client, codes in (
        ("EPSG:10177", "EPSG:9989", ["EPSG:10179 inverse"]),
        ("EPSG:9379", "EPSG:7912", ["EPSG:9381 inverse"]),
        ("EPSG:9018", "EPSG:7912", ["EPSG:9032 inverse"]),
        ("EPSG:9013", "EPSG:7911", ["EPSG:9031 inverse"]),
        ("EPSG:9016", "EPSG:7911", ["EPSG:9037 inverse", "EPSG:9031 inverse"]),
        ("EPSG:9989", "EPSG:10177", ["EPSG:10179"]),
        ("EPSG:7911", "EPSG:9016", ["EPSG:9031", "EPSG:9037"]),
        ("EPSG:10177", "EPSG:9379", ["EPSG:10179 inverse", "EPSG:9991 inverse", "EPSG:9381"]),
    ):
        choice = FrameChoice(receiver, client, receiver_epoch=EPOCH, client_epoch=EPOCH)
        found, operation = transform_to_client(choice, *ALICE, EPOCH)
        assert found is not None
        assert operation_codes(operation) == codes
        if len(set(codes) & {"EPSG:9991 inverse"}) == 0:
            assert operation.shift_enu_m == pytest.approx([0.0, 0.0, 0.0], abs=1e-9)


def test_declared_equality_is_printed_with_its_uncertainty() -> None:
    """France: RGF93 v2b taken as ETRF2000, then ITRF2020 to it by EPSG:10586."""
    equality = TakenAs("EPSG:9781", "EPSG:7931", "invented note 12/2026", 0.02)
    choice = FrameChoice("EPSG:9989", "EPSG:9781", receiver_epoch="observation", taken_as=(equality,))
    client, operation = transform_to_client(choice, 45.75, 4.85, 220.0, EPOCH)
    assert client is not None
    assert client.frame == "EPSG:9781"
    assert operation_codes(operation) == ["EPSG:10586", "declared:EPSG:9781=EPSG:7931 inverse"]
    assert operation.steps[1].accuracy_m == 0.02
    assert operation.steps[1].remark == "invented note 12/2026"
    assert operation.accuracy_m == pytest.approx(0.02)
    plain = FrameChoice("EPSG:9989", "EPSG:7931", receiver_epoch="observation")
    other, _ = transform_to_client(plain, 45.75, 4.85, 220.0, EPOCH)
    assert other is not None
    assert (client.x_m, client.y_m, client.z_m) == (other.x_m, other.y_m, other.z_m)


# --- recorded operations ------------------------------------------------------------------------------------


def test_recorded_steps_are_kept() -> None:
    """EPSG:8366 is chosen, 8880 is as sound: recorded, it is kept, and the figures are the same to 0.01 mm."""
    choice = FrameChoice("EPSG:7912", "EPSG:8403", receiver_epoch=EPOCH)
    chosen, operation = transform_to_client(choice, 50.1, 8.7, 150.0, EPOCH)
    assert operation_codes(operation) == ["EPSG:8366"]
    kept, operation = transform_to_client(choice, 50.1, 8.7, 150.0, EPOCH, keep_steps=["EPSG:8880"])
    assert operation_codes(operation) == ["EPSG:8880"]
    assert chosen is not None
    assert kept is not None
    assert [kept.x_m, kept.y_m, kept.z_m] == pytest.approx([chosen.x_m, chosen.y_m, chosen.z_m], abs=1e-5)


def test_recorded_steps_that_are_gone() -> None:
    for gone in (["EPSG:1234"], [], ["EPSG:8450 inverse"]):
        with pytest.raises(OperationChanged) as error:
            transform_to_client(SAMPLE, *ALICE, EPOCH, keep_steps=gone)
        assert error.value.would_use == ["EPSG:8049"]
        assert error.value.code == "operation_changed"


def test_every_route_is_kept_by_its_own_codes() -> None:
    motion = Motion(model="ITRF2020", plate="AUST", sigma_m_per_year=0.0003)
    for choice in (
        SAMPLE,
        FrameChoice("EPSG:10605", "EPSG:7843", receiver_epoch=EPOCH),
        FrameChoice("EPSG:10177", "EPSG:7843", receiver_epoch=EPOCH),
        FrameChoice("EPSG:7843", "EPSG:7843"),
        FrameChoice("EPSG:9989", "EPSG:7912", receiver_epoch=EPOCH, client_epoch=2020.0, motion=(motion,)),
        FrameChoice("EPSG:9989", "EPSG:9989", receiver_epoch=EPOCH, client_epoch=2020.0, motion=(motion,)),
    ):
        first = transform_to_client(choice, *ALICE, EPOCH)
        again = transform_to_client(choice, *ALICE, EPOCH, keep_steps=operation_codes(first[1]))
        assert first == again


# --- motion ------------------------------------------------------------------------------------------


def test_epochs_that_turn_out_different() -> None:
    """Both 'observation' is no motion; a year that happens to be the observation's is refused before the first byte."""
    choice = FrameChoice("EPSG:7912", "EPSG:9989", receiver_epoch="observation", client_epoch="observation")
    transform_to_client(choice, *ALICE, EPOCH)
    motion = Motion(model="ITRF2014", plate="AUST", sigma_m_per_year=0.0003)
    same = replace(choice, client_epoch=EPOCH, motion=(motion,))
    _, operation = transform_to_client(same, *ALICE, EPOCH)
    assert operation_codes(operation) == ["EPSG:9991"]


def test_motion_over_the_limit() -> None:
    motion = Motion(velocity_m_per_year=(0.1, 0.0, 0.0), sigma_m_per_year=0.05, source="invented")
    choice = FrameChoice("EPSG:9989", "EPSG:9989", receiver_epoch=EPOCH, client_epoch=2020.0, motion=(motion,))
    assert refused(choice, *ALICE).code == "accuracy_over_limit"


# --- height against ITRF2020 --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("code", "place", "difference_m"),
    [
        ("EPSG:9989", ALICE, 0.0),
        ("EPSG:7843", ALICE, -0.0037),
        ("EPSG:4939", ALICE, 0.0940),
        ("EPSG:7931", (50.1, 8.7, 150.0), -0.0180),
        ("EPSG:6319", (39.22, -98.54, 570.0), 0.9943),
        ("EPSG:10413", (49.9, -97.2, 230.0), 0.7104),
    ],
)
def test_height_against_itrf2020(code: str, place: tuple[float, float, float], difference_m: float) -> None:
    """frame_pairs.csv, last column; the place is given in the frame, not in ITRF2020: 0.3 mm."""
    assert ellipsoidal_height_difference_to_itrf2020(code, *place, EPOCH) == pytest.approx(difference_m, abs=3e-4)


# --- the judge itself ---------------------------------------------------------------------------------------


def side(name: str, datum: str, *, moving: bool = False, ensemble: bool = False) -> dict[str, object]:
    if ensemble:
        return {"name": name, "datum_ensemble": {"name": datum}}
    kind = "DynamicGeodeticReferenceFrame" if moving else "GeodeticReferenceFrame"
    return {"name": name, "datum": {"type": kind, "name": datum}}


A, B = side("A", "Datum A"), side("B", "Datum B", moving=True)
SCAFFOLD = side("ITRF2014", "International Terrestrial Reference Frame 2014", moving=True)
TIME, STILL = "Time-dependent Position Vector tfm (geocentric)", "Geocentric translations (geocentric domain)"


def step(source: object, target: object, **more: object) -> dict[str, object]:
    tree: dict[str, object] = {
        "type": "Transformation", "name": "a to b", "source_crs": source, "target_crs": target, "accuracy": "0.01",
        "id": {"authority": "EPSG", "code": 1}, "method": {"name": TIME},
    }  # fmt: skip
    return tree | more


def judged(*steps: dict[str, object], epoch: float | None = EPOCH) -> str:
    ends = judge._Ends(frozenset({"Datum A", "Datum B"}), epoch)
    return judge._judged({"steps": list(steps)}, 0.02, ends)[1]


OWN_EPOCH = [{"name": "Transformation reference epoch", "value": 2010.0}]


@pytest.mark.parametrize(
    ("steps", "epoch", "said"),
    [
        ([step(A, B)], EPOCH, ""),
        ([step(A, SCAFFOLD), step(SCAFFOLD, B)], EPOCH, ""),
        ([step(A, side("E", "Ensemble", ensemble=True))], EPOCH, "ensemble"),
        ([step(A, side("C", "Datum C")), step(side("C", "Datum C"), B)], EPOCH, "foreign frame, C"),
        ([step(A, side("ETRF2000-PL", "Datum PL"))], EPOCH, "foreign frame, ETRF2000-PL"),
        ([step(A, side("NKG_ETRF14", "NKG"))], EPOCH, "foreign frame"),
        ([step(A, {})], EPOCH, "foreign frame, unnamed"),
        ([step(A, B, accuracy="-1")], EPOCH, "states no accuracy"),
        ([{k: v for k, v in step(A, B).items() if k != "accuracy"}], EPOCH, "states no accuracy"),
        ([step(A, B, method={"name": STILL})], EPOCH, "without rates"),
        ([step(A, B, method={"name": STILL})], 2005.0, "without rates"),
        (
            [step(A, B, method={"name": "Time-specific Position Vector transform (geocen)"}, parameters=OWN_EPOCH)],
            EPOCH,
            "without rates",
        ),
        (
            [step(A, B, method={"name": "Time-specific Position Vector transform (geocen)"}, parameters=OWN_EPOCH)],
            2010.005,
            "",
        ),
        (
            [step(A, B, method={"name": "Time-specific Position Vector transform (geocen)"}, parameters=OWN_EPOCH)],
            2010.02,
            "without rates",
        ),
        ([step(A, B, method={"name": "New Zealand Deformation Model"})], EPOCH, ""),
        ([step(A, B, method={"name": "Geographic3D Offset by velocity grid (NTv2_Vel)"})], EPOCH, ""),
        ([step(A, B)], None, "depends on time"),
        ([], EPOCH, "null copy"),
        ([{"type": "Conversion", "name": "axis order change (2D)"}], EPOCH, "null copy"),
        ([step(A, A, method={"name": "Geographic3D offsets"})], EPOCH, "null copy"),
    ],
)
def test_rules(steps: list[dict[str, object]], epoch: float | None, said: str) -> None:
    reason = judged(*steps, epoch=epoch)
    assert said in reason
    assert bool(reason) == bool(said)


def test_nkg_chain_keeps_its_own_frames_and_gets_its_stated_accuracy() -> None:
    inner = side("NKG_ETRF14", "NKG_ETRF14")
    chain = [
        step(SCAFFOLD, inner, name="Inverse of NKG_ETRF14 to ITRF2014", id={}, accuracy="x",
             method={"name": "PROJ-based operation method: +proj=deformation"}),
        step(inner, A, id={"authority": "NKG", "code": "PAR_2020_SE"}, accuracy="0.005", method={"name": STILL}),
    ]  # fmt: skip
    ends = judge._Ends(frozenset({"Datum A", "Datum B"}), EPOCH)
    steps, reason, _, total = judge._judged({"steps": chain}, 0.02, ends)
    assert reason == ""
    assert total == pytest.approx(0.02)
    assert [item.accuracy_m for item in steps] == pytest.approx([0.015, 0.005])
    assert steps[0].inverse


@pytest.mark.parametrize(
    ("authority", "wanted"),
    [
        ("EPSG", ("EPSG", "9991", False)),
        ("INVERSE(EPSG)", ("EPSG", "9991", True)),
        ("DERIVED_FROM(EPSG)", ("EPSG", "9991", False)),
        ("INVERSE(DERIVED_FROM(EPSG))", ("EPSG", "9991", True)),
    ],
)
def test_names_of_authorities(authority: str, wanted: tuple[str, str, bool]) -> None:
    assert judge._identity({"name": "x", "id": {"authority": authority, "code": 9991}}) == wanted


def test_inverse_really_runs_backwards() -> None:
    """EPSG:9991 leads from ITRF2014 to ITRF2020. Recorded 'inverse' must move the other way than 'EPSG:9991'."""
    forward = FrameChoice("EPSG:7912", "EPSG:9989", receiver_epoch=EPOCH, client_epoch=EPOCH)
    backward = FrameChoice("EPSG:9989", "EPSG:7912", receiver_epoch=EPOCH, client_epoch=EPOCH)
    one, two = (transform_to_client(choice, *ALICE, EPOCH)[1] for choice in (forward, backward))
    assert (operation_codes(one), operation_codes(two)) == (["EPSG:9991"], ["EPSG:9991 inverse"])
    assert one.shift_enu_m == pytest.approx([-value for value in two.shift_enu_m or []], abs=1e-6)
    single = Transformer.from_pipeline("EPSG:8049")
    x, y, z, _ = single.transform(
        -4052052.6588, 4212835.9938, -2545104.6946, 2018.0, direction=TransformDirection.FORWARD
    )
    assert (x, y, z) == pytest.approx((-4052052.7373, 4212835.9835, -2545104.5867), abs=1e-4)


def test_threads_share_the_gateway() -> None:
    """Eight threads, one cached transformer: the same figures to the last bit."""
    wanted = transform_to_client(SAMPLE, *ALICE, EPOCH)
    with ThreadPoolExecutor(8) as pool:
        found = list(pool.map(lambda _: transform_to_client(SAMPLE, *ALICE, EPOCH), range(200)))
    assert all(item == wanted for item in found)
