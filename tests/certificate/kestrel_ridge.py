"""An invented job for the certificate's tests: mark KR-07, Kestrel Ridge, observed by an invented firm.

All figures are invented; those that depend on each other (geocentric, grid, factors) were computed once with pyproj
3.7.2 from the latitude, longitude and height below, so that the paper reads true. Two occupations; the first is the
one that is certified.
"""

from __future__ import annotations

import math
import random
from datetime import date
from decimal import Decimal

from fieldbook.certificate.facts import build_facts
from fieldbook.certificate.identity import sealed
from fieldbook.certificate.repeats import repeats_of
from fieldbook.model.canonical import Tree
from fieldbook.model.entry import GENESIS, Entry
from fieldbook.model.reduction import (
    AntennaHeight,
    BudgetLine,
    ClientPosition,
    Ellipse95,
    Finding,
    Geodetic,
    GridPosition,
    Height,
    Initialisation,
    Leave,
    LeaveLine,
    Operation,
    OperationStep,
    ReadingReduced,
    Reduction,
    Trace,
    Uncertainty,
)
from fieldbook.model.session import (
    Antenna,
    Corrections,
    FrameChoice,
    HeightReading,
    Job,
    Mark,
    Receiver,
    Requirement,
    Session,
    Setup,
    WitnessMark,
)
from fieldbook.model.state import BookState, Occupation

BOOK_ID = "3f2a91c0-5b1e-4c7d-9a44-7d0f6b2e8c15"
VERSIONS = {"program": "0.1.0", "proj": "9.5.1", "epsg": "v11.022", "pyproj": "3.7.2"}
SIGN_OFF = "M. Okonjo; registered surveyor 2291"


def entry(seq: int, kind: str, body: dict, observer: str = "R. Kell", utc: str = "") -> Entry:
    return Entry(seq, utc or f"2027-03-04T01:{seq:02d}:00.000Z", kind, body, observer, GENESIS, f"{seq:064x}")


def session() -> Session:
    return Session(
        job=Job(
            title="Kestrel Ridge control",
            observer="R. Kell",
            client="Upper Tarn Water Board",
            firm="Okonjo & Kell, Surveyors, 4 Mill Lane, Tarnford",
            purpose="Control for the spillway monitoring of the Upper Tarn dam",
        ),
        requirement=Requirement(
            horizontal_95_m=0.020,
            vertical_95_m=0.040,
            accept_quality=(4,),
            occupations=2,
            minimum_time_s=300.0,
            initialisations=2,
            hours_between=4.0,
            max_hdop=3.0,
            max_correction_age_s=10.0,
            min_satellites=6,
            source="Upper Tarn Water Board, monitoring brief 2026, clause 4.2",
        ),
        frame=FrameChoice(
            receiver="EPSG:7912",
            client="EPSG:7843",
            receiver_epoch="observation",
            client_epoch=2020.0,
            grid="EPSG:7855",
            geoid="egm96_15.gtx",
        ),
        corrections=Corrections(
            kind="own base on known mark",
            station="0042",
            coordinates="KR-01, register of the Water Board",
            frame="EPSG:7912",
            source="register extract of 2026-11-02",
            u95_m=0.012,
            distance_m=1840.0,
        ),
        mark=Mark(
            name="KR-07",
            description="brass plate in rock, 60 mm across, flush with the surface",
            id="UT 1107",
            inscription="KR 7 2026",
            access="from the ridge track, gate 3, 140 m on foot to the north-east",
            condition="firm, no damage",
            witness_marks=(
                WitnessMark("drill hole in boulder", 41.0, 6.215),
                WitnessMark("corner post of the stock fence", 203.5, 11.48),
                WitnessMark("iron tube 0.10 m down beside the track"),
            ),
        ),
        antenna=Antenna(
            model="DEMO-A1 NONE",
            serial="0001",
            orientation_deg=0.0,
            arp_to_phase_centre_north_m=0.0005,
            arp_to_phase_centre_east_m=-0.0003,
            arp_to_phase_centre_up_m=0.0873,
            offset_frequency="L1",
            slant_radius_m=0.15,
            slant_mark_above_arp_m=0.03,
        ),
        setup=Setup(
            reported_point="phase centre",
            centring="optical plummet",
            centring_sigma_m=0.001,
            support="tripod",
            tribrach_id="T-14",
            last_check="2027-01-18",
            reading_sigma_m=0.001,
        ),
        receiver=Receiver(link="file:receiver.nmea", maker="Demo", model="R2", serial="R2-0077", firmware="4.1.2"),
    )


HEIGHTS = [
    HeightReading("slant", Decimal("1.5320"), "m", "before", "notch 1", "R. Kell", "01:04", seq=7),
    HeightReading("slant", Decimal("5.03"), "ft", "before", "notch 4", "A. Dunmore", "01:05", seq=8),
    HeightReading("slant", Decimal("1.5330"), "m", "after", "notch 1", "R. Kell", "01:32", seq=21),
]


def arp_m(slant_m: float) -> float:
    """Contract, section 2: ARP height = sqrt(s^2 - slant_radius^2) - slant_mark_above_arp."""
    return math.sqrt(slant_m**2 - 0.15**2) - 0.03


def occupation() -> Occupation:
    return Occupation(
        number=1,
        mark="KR-07",
        session=session(),
        entry_seq=5,
        started_utc="2027-03-04T01:06:40.000Z",
        observer="R. Kell",
        link="file:receiver.nmea",
        simulated=False,
        heights=list(HEIGHTS),
        ended_by="end of file",
        ended_utc="2027-03-04T01:31:05.000Z",
        day0=date(2027, 3, 4),
        day0_source="RMC",
        decisions=[
            entry(
                23,
                "decision",
                {"occupation": 1, "initialisation": 2, "used": False, "reason": "wrong fix, 0.19 m off"},
            )
        ],
        remarks=[
            entry(12, "remark", {"occupation": 1, "text": "tribrach re-levelled"}),
            entry(15, "remark", {"occupation": 1, "text": "lorry parked 8 m north, left at 01:21"}, "A. Dunmore"),
        ],
        gaps=[
            entry(
                14,
                "gap",
                {
                    "occupation": 1,
                    "reason": "link lost",
                    "from_utc": "2027-03-04T01:17:04.000Z",
                    "to_utc": "2027-03-04T01:17:41.000Z",
                    "seconds": 37,
                },
            )
        ],
        struck=[entry(6, "height", {"occupation": 1, "value": "1.3520", "unit": "m"})],
        received_sha256="ab" * 32,
        received_bytes=412_803,
    )


def state(occ: Occupation | None = None) -> BookState:
    second = occupation()
    second.number, second.entry_seq = 2, 30
    return BookState(
        id=BOOK_ID,
        head_seq=41,
        head_hash="5c" * 32,
        created_utc="2027-03-04T00:40:00.000Z",
        session=session(),
        occupations={1: occ or occupation(), 2: second},
        marks={
            "KR-07": {
                "name": "KR-07",
                "description": "brass plate in rock, 60 mm across, flush with the surface",
            }
        },
        strikes={
            6: entry(7, "strike", {"seq": 6, "reason": "digits swapped, read again"}),
        },
    )


def budget(*, client: bool) -> list[BudgetLine]:
    lines = [
        BudgetLine("mean of the fixes, correlation included", "A", "t", [0.00262, 0.00294, 0.00541], 14.2, False),
        BudgetLine(
            "least uncertainty claimed for this kind of fix",
            "B",
            "normal",
            [0.0036, 0.0036, 0.00675],
            8.0,
            True,
            "half of its variance common to all marks from this station and antenna",
        ),
        BudgetLine("coordinate resolution", "B", "rectangular", [0.0, 0.0, 0.00029], None, False),
        BudgetLine("geoid separation resolution", "B", "rectangular", [None, None, 0.00029], None, True),
        BudgetLine("antenna height readings", "B", "normal", [None, None, 0.00074], 20.0, False),
        BudgetLine("centring over the mark", "B", "normal", [0.001, 0.001, None], None, False),
        BudgetLine("phase centre, pattern not applied", "B", "normal", [0.002, 0.002, 0.005], None, True),
        BudgetLine("plumb line against ellipsoidal normal", "B", "rectangular", [0.00004, 0.00004, None], None, True),
    ]
    if client:
        lines.append(
            BudgetLine(
                "EPSG:8049, accuracy as stated by EPSG, probability not given",
                "B",
                "as stated",
                [0.001, 0.001, 0.001],
                None,
                True,
            )
        )
    return lines


def uncertainty(*, client: bool = False) -> Uncertainty:
    extra = 0.001**2 if client else 0.0
    ee, en, nn = 2.45e-5 + extra, 0.3e-5, 2.63e-5 + extra
    largest = (ee + nn) / 2 + math.hypot((ee - nn) / 2, en)
    smallest = (ee + nn) / 2 - math.hypot((ee - nn) / 2, en)
    return Uncertainty(
        u_enu_m=[math.sqrt(ee), math.sqrt(nn), math.sqrt(1.0128e-4 + extra)],
        cov_en_m2=[[ee, en], [en, nn]],
        dof_enu=[24.1, 22.9, 25.8],
        k95_enu=[2.063, 2.069, 2.056],
        ellipse95=Ellipse95(2.68 * math.sqrt(largest), 2.68 * math.sqrt(smallest), 36.6),
        horizontal95_m=0.01352 + (0.0003 if client else 0.0),
        vertical95_m=2.056 * math.sqrt(1.0128e-4 + extra),
        correlation_time_s=187.4,
        governed_by="class and data",
        method="Gauss-Markov model of the errors, generalised least-squares mean, variance shrunk to the kind of fix",
        budget=budget(client=client),
        common=["least uncertainty claimed for this kind of fix (half of its variance)", "phase centre", "EPSG:8049"]
        if client
        else None,
    )


def readings() -> list[ReadingReduced]:
    return [
        ReadingReduced(
            item.method,
            str(item.value),
            item.unit,
            item.when,
            item.value_m,
            arp_m(item.value_m),
            0.001,
            item.at,
            item.reader,
            item.time,
            item.seq,
        )
        for item in HEIGHTS
    ]


def leave() -> Leave:
    return Leave(
        "good to leave",
        [
            LeaveLine("horizontal_95_m", "set-up", 0.020, 0.014, "m", True, 0.0, "reached"),
            LeaveLine("vertical_95_m", "set-up", 0.040, 0.021, "m", True, 0.0, "reached"),
            LeaveLine("minimum_time_s", "set-up", 300.0, 1163.0, "s", True, 0.0, "reached"),
            LeaveLine("initialisations", "set-up", 2.0, 2.0, "", True, 0.0, "2 agree"),
            LeaveLine("height_readings", "set-up", "before and after", "before and after", "", True, None, "both"),
            LeaveLine("occupations", "mark", 2.0, 1.0, "", False, None, "a second occupation is owed"),
            LeaveLine("hours_between", "mark", 4.0, None, "h", False, None, "come back from 05:30 UTC"),
        ],
    )


def findings() -> list[Finding]:
    return [
        Finding(
            "one_initialisation_wrong",
            "caution",
            "Initialisation 2 lies 187 mm from the other two; its 61 epochs are not used.",
            {"offset_m": 0.1874, "epochs": 61},
        ),
        Finding(
            "class_governs",
            "info",
            "The least uncertainty claimed for this kind of fix is larger than the scatter; a second occupation "
            "hours later helps more than staying longer.",
        ),
    ]


def reduction() -> Reduction:
    return Reduction(
        mark="KR-07",
        occupation=1,
        open=False,
        ended_by="end of file",
        started="2027-03-04T01:10:00.000Z",
        ended="2027-03-04T01:30:59.000Z",
        heard_from="2027-03-04T01:09:48.000Z",
        heard_to="2027-03-04T01:31:00.000Z",
        kept_s=1163.0,
        heard=1243,
        kept=1163,
        without_height=0,
        set_aside={"age": 8, "quality": 5, "outlier": 6, "initialisation": 61},
        initialisations=[
            Initialisation(
                1, "2027-03-04T01:10:00.000Z", "2027-03-04T01:16:59.000Z", 410, True, [0.0011, -0.0008, 0.0021]
            ),
            Initialisation(
                2,
                "2027-03-04T01:17:46.000Z",
                "2027-03-04T01:18:51.000Z",
                61,
                False,
                [0.1571, -0.1022, 0.2110],
                reason="187 mm from the others",
            ),
            Initialisation(
                3, "2027-03-04T01:18:55.000Z", "2027-03-04T01:30:59.000Z", 753, True, [-0.0006, 0.0004, -0.0012]
            ),
        ],
        receiver=Geodetic(
            "EPSG:7912", "ITRF2014", 2027.1712, -36.41271495649789, 148.31076566434237, 1203.345336213708
        ),
        client=ClientPosition(
            "EPSG:7843",
            "GDA2020",
            None,
            -36.412718543217,
            148.310764219876,
            1203.346612,
            -4373604.562827529,
            2700058.266583782,
            -3765858.788167162,
        ),
        grid=GridPosition(
            "EPSG:7855",
            "GDA2020 / MGA zone 55",
            617520.5003561577,
            5969475.412663758,
            -0.7781554925365614,
            0.9997701614026627,
            0.9998111800812091,
            0.9995813848819771,
            "MGA zone 55",
        ),
        height=Height(
            "egm96_15.gtx",
            "EGM96 (15 minute)",
            "c3" * 32,
            "ITRF / WGS 84",
            None,
            20.18431,
            None,
            1183.162302,
            None,
            "height above geoid model EGM96 (15 minute), no national height datum",
        ),
        antenna=AntennaHeight(1.494836, 0.00074, "phase centre", readings(), 1.494741, None, 1.495643),
        uncertainty=uncertainty(),
        uncertainty_client=uncertainty(client=True),
        operation=Operation(
            "ITRF2014 to GDA2020 (1)",
            [OperationStep("EPSG", "8049", "ITRF2014 to GDA2020 (1)", 0.001)],
            2027.1712,
            True,
            [],
            0.001,
            [0.1294, -0.3981, 0.0013],
        ),
        findings=findings(),
        leave=leave(),
        epoch_of_observation=2027.1712,
    )


def second_reduction() -> Reduction:
    other = reduction()
    other.occupation = 2
    other.started, other.ended = "2027-03-05T06:02:00.000Z", "2027-03-05T06:21:59.000Z"
    assert other.client is not None
    other.client.lat_deg += 4.0e-8
    other.client.lon_deg -= 6.0e-8
    other.client.h_m = 1203.3527
    return other


def trace() -> Trace:
    """1,243 epochs about the mean: slow correlated errors, one wrong initialisation, a few outliers."""
    rng = random.Random(7)
    east = north = up = 0.0
    made = Trace([], [], [], [], [], [])
    for second in range(1260):
        east = 0.995 * east + rng.gauss(0, 0.00042)
        north = 0.995 * north + rng.gauss(0, 0.00047)
        up = 0.995 * up + rng.gauss(0, 0.00090)
        if 440 < second < 477:
            continue  # link lost
        initialisation = 1 if second < 460 else 2 if second < 545 else 3
        wrong = initialisation == 2
        outlier = second in {120, 301, 733, 734, 980, 1111}
        made.time_s.append(float(second))
        made.east_m.append(east + rng.gauss(0, 0.0012) + (0.157 if wrong else 0.0) + (0.031 if outlier else 0.0))
        made.north_m.append(north + rng.gauss(0, 0.0012) - (0.102 if wrong else 0.0))
        made.up_m.append(up + rng.gauss(0, 0.0022) + (0.211 if wrong else 0.0) - (0.044 if outlier else 0.0))
        made.kept.append(not wrong and not outlier)
        made.initialisation.append(initialisation)
    return made


def issued_facts(**document: object) -> Tree:
    """Facts of the first occupation, signed, numbered and sealed."""
    occ, reduced = occupation(), reduction()
    facts = build_facts(
        state(occ),
        occ,
        reduced,
        trace(),
        sign_off=SIGN_OFF,
        repeats=repeats_of(reduced, [second_reduction()]),
        versions=VERSIONS,
    )
    facts["document"] = {
        "kind": "certificate",
        "number": "3f2a91c0-2",
        "revision": 2,
        "issued_utc": "2027-03-09T14:12:05.000Z",
        "supersedes": "3f2a91c0-1",
        "reason": "antenna serial number corrected",
        "changed": ["antenna"],
        **document,
    }
    return sealed(facts)
