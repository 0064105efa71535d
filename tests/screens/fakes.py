"""An invented job for the tests of the screens: a session, an occupation, a picture of it, and a bridge without a book.

Numbers are made up to look like a field day; nothing here checks a reduction.
"""

from __future__ import annotations

import dataclasses
import math
import random
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from fieldbook.clock import FakeClock, utc_ms_of, utc_text
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, canonical_json
from fieldbook.model.entry import GENESIS, Entry, entry_hash
from fieldbook.model.epoch import Satellite
from fieldbook.model.live import LiveView
from fieldbook.model.recorder import RecorderState
from fieldbook.model.reduction import (
    AntennaHeight,
    BudgetLine,
    ClientPosition,
    Convergence,
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
from fieldbook.model.state import BookState, Occupation
from fieldbook.screens.bridge import Bridge, FramesTold, Issued, Port
from fieldbook.screens.sheets import Reduced, Sheet
from fieldbook.settings.session import reading_from_tree, session_from_tree

NOW_MS = utc_ms_of("2027-03-04T09:41:22.000Z")
SESSION_TREE: Tree = {
    "job": {"title": "Kestrel Ridge control", "observer": "R. Kell", "client": "Ridge Water Board"},
    "requirement": {
        "horizontal_95_m": "0.020",
        "vertical_95_m": "0.040",
        "minimum_time_s": "900",
        "initialisations": 2,
        "occupations": 2,
        "hours_between": "4.0",
        "height_readings": "before and after",
        "accept_quality": [4],
    },
    "frame": {
        "receiver": "EPSG:7912",
        "receiver_epoch": "observation",
        "client": "EPSG:7843",
        "client_epoch": "2020.0",
        "grid": "EPSG:7855",
        "geoid": "egm96_15.gtx",
    },
    "corrections": {"kind": "own base on known mark", "station": "0042"},
    "mark": {
        "name": "KR-07",
        "description": "brass plate in rock",
        "inscription": "KR 07 1998",
        "access": "track from the east gate",
    },
    "antenna": {
        "model": "DEMO-A1 NONE",
        "serial": "0001",
        "orientation_deg": "0.0",
        "arp_to_phase_centre_m": {"north": "0.0005", "east": "-0.0003", "up": "0.0873"},
        "slant_radius_m": "0.1500",
        "slant_mark_above_arp_m": "0.0300",
    },
    "setup": {
        "reported_point": "phase centre",
        "support": "tripod",
        "tribrach_id": "T12",
        "centring": "optical plummet",
        "centring_sigma_m": "0.001",
        "reading_sigma_m": "0.001",
        "height": [{"method": "slant", "value": "1.5320", "unit": "m", "when": "before", "at": "notch 1"}],
    },
    "receiver": {"link": "sim:rtk?seed=7"},
}


def uncertainty(scale: float = 1.0) -> Uncertainty:
    """Standard uncertainties of a few millimetres."""
    return Uncertainty(
        u_enu_m=[0.006 * scale, 0.005 * scale, 0.011 * scale],
        cov_en_m2=[[3.6e-5 * scale**2, 1.0e-5 * scale**2], [1.0e-5 * scale**2, 2.5e-5 * scale**2]],
        dof_enu=[8.0, 8.0, 9.0],
        k95_enu=[2.3, 2.3, 2.3],
        ellipse95=Ellipse95(0.0182 * scale, 0.0121 * scale, 51.0),
        horizontal95_m=0.0165 * scale,
        vertical95_m=0.0249 * scale,
        correlation_time_s=190.0,
        governed_by="class and data",
        method="block means",
        budget=[
            BudgetLine("mean of the kept epochs", "A", "normal", [0.003, 0.003, 0.006], 6.0, False),
            BudgetLine(
                "least uncertainty claimed for this kind of fix", "B", "normal", [0.0045, 0.0045, 0.009], 8.0, True
            ),
            BudgetLine("height of antenna", "B", "normal", [0.0, 0.0, 0.0011], None, False),
            BudgetLine("centring", "B", "normal", [0.001, 0.001, None], None, False),
        ],
    )


def reading() -> ReadingReduced:
    """The sample reading of the contract: 1.5320 m slant is 1.49464 m above the mark."""
    return ReadingReduced("slant", "1.5320", "m", "before", 1.5320, 1.49464, 0.001, "notch 1")


def reduction(name: str = "KR-07", number: int = 1, *, opened: bool = True, met: bool = False) -> Reduction:
    """An occupation as `reduce` would give it."""
    lines = [
        LeaveLine("horizontal_95_m", "set-up", 0.020, 0.0165, "m", True, 0.0, "95 % horizontal 17 mm, wanted 20 mm"),
        LeaveLine("vertical_95_m", "set-up", 0.040, 0.0249, "m", True, 0.0, "95 % height 25 mm, wanted 40 mm"),
        LeaveLine(
            "minimum_time_s", "set-up", 900.0, 900.0 if met else 842.0, "s", met, 0.0 if met else 58.0, "58 s to go"
        ),
        LeaveLine("initialisations", "set-up", 2, 2, "", True, 0.0, ""),
        LeaveLine(
            "height_readings",
            "set-up",
            "before and after",
            "before and after" if met else "before",
            "",
            met,
            None,
            "Read the height of the antenna again before the tripod moves.",
        ),
        LeaveLine("occupations", "mark", 2, 1, "", False, None, "Come back from 13:40 UTC for the second occupation."),
    ]
    return Reduction(
        mark=name,
        occupation=number,
        open=opened,
        ended_by=None if opened else "operator",
        started="2027-03-04T09:27:20.000Z",
        ended="2027-03-04T09:41:21.000Z",
        heard_from="2027-03-04T09:27:00.000Z",
        heard_to="2027-03-04T09:41:21.000Z",
        kept_s=842.0,
        heard=861,
        kept=842,
        without_height=0,
        set_aside={"age": 12, "outlier": 6, "quality": 1},
        initialisations=[
            Initialisation(
                1, "2027-03-04T09:27:20.000Z", "2027-03-04T09:33:00.000Z", 340, True, [0.002, -0.003, 0.004]
            ),
            Initialisation(
                2, "2027-03-04T09:33:20.000Z", "2027-03-04T09:41:21.000Z", 502, True, [-0.002, 0.002, -0.003]
            ),
            Initialisation(
                3,
                "2027-03-04T09:33:05.000Z",
                "2027-03-04T09:33:15.000Z",
                9,
                False,
                [0.412, 0.180, -0.6],
                reason="disagrees",
            ),
        ],
        receiver=Geodetic("EPSG:7912", "ITRF2014", 2027.17, -23.6701239, 148.8855133, 603.35),
        client=ClientPosition(
            "EPSG:7843", "GDA2020", None, -23.670123892, 148.885513289, 603.3466, -5.0e6, 3.02e6, -2.5e6
        ),
        grid=GridPosition(
            "EPSG:7855", "GDA2020 / MGA zone 55", 692244.1234, 7381234.5678, 0.7571, 1.00005, 0.999906, 0.999956
        ),
        height=Height(
            "egm96_15.gtx",
            "EGM96 (15 minute)",
            "0" * 64,
            "EPSG:7912",
            None,
            51.234,
            0.3,
            552.1126,
            0.61,
            "height above geoid model EGM96 (15 minute), no national height datum",
        ),
        antenna=AntennaHeight(1.49464, 0.001, "phase centre", [reading()], before_m=1.49464),
        uncertainty=uncertainty(),
        uncertainty_client=uncertainty(1.1),
        operation=Operation(
            "ITRF2014 to GDA2020", [OperationStep("EPSG", "8049", "ITRF2014 to GDA2020 (1)", 0.001)], 2027.17, True, []
        ),
        findings=[
            Finding("height_reading_missing_after", "caution", "The height of the antenna was read before only.", {}),
            Finding("set_aside_many", "info", "19 of 861 epochs are set aside.", {}),
        ],
        leave=Leave("good to leave" if met else "not yet", lines),
        epoch_of_observation=2027.17,
    )


def trace(count: int = 600, seed: int = 3) -> Trace:
    """Kept fixes about the mean, elongated along azimuth 51 degrees, two initialisations, a few set aside."""
    source = random.Random(seed)
    east, north, up, kept, run = [], [], [], [], []
    for number in range(count):
        along, across = source.gauss(0, 0.009), source.gauss(0, 0.004)
        east.append(along * math.sin(math.radians(51)) + across * math.cos(math.radians(51)))
        north.append(along * math.cos(math.radians(51)) - across * math.sin(math.radians(51)))
        up.append(source.gauss(0, 0.012))
        kept.append(number % 50 != 7)
        run.append(1 if number < count * 0.4 else 2)
        if not kept[-1]:
            east[-1] += 0.02
            up[-1] += 0.06
    return Trace([float(n) for n in range(count)], east, north, list(up), kept, run)


SKY = [
    Satellite("GPS", 5, 67, 20, 47.0, True),
    Satellite("GPS", 12, 41, 120, 43.0, True),
    Satellite("GPS", 25, 12, 300, 31.0, False),
    Satellite("Galileo", 11, 55, 210, 45.0, True),
    Satellite("Galileo", 24, 28, 265, 39.0, True),
    Satellite("GLONASS", 3, 33, 75, 38.0, True),
    Satellite("BeiDou", 21, 49, 160, 42.0, True),
    Satellite("BeiDou", 29, 15, 35, None, False),
]


def occupation(number: int = 1, *, ended: str | None = None, tree: Tree | None = None) -> Occupation:
    """An occupation of the session's mark."""
    session = session_from_tree(tree or SESSION_TREE)
    return Occupation(
        number,
        session.mark.name,
        session,
        5,
        "2027-03-04T09:27:00.000Z",
        "R. Kell",
        session.receiver.link,
        True,
        heights=[reading_from_tree(item, 5) for item in session.tree["setup"].get("height", [])],
        ended_by=ended,
    )


def recorder(**changes: Any) -> RecorderState:
    """The recorder's last words."""
    state = RecorderState(
        occupation=1,
        mark="KR-07",
        observer="R. Kell",
        link="sim:rtk?seed=7",
        link_state="open",
        started_utc_ms=NOW_MS - 842_000,
        last_byte_utc_ms=NOW_MS,
        last_commit_utc_ms=NOW_MS,
        last_commit_took_ms=4.0,
        received_bytes=456789,
        epochs=861,
        sentences={"GNGGA": 861, "GNGSA": 861, "GPGSV": 300},
        counters={"bad_checksum": 2},
        sky=list(SKY),
        fix_utc="2027-03-04T09:41:21.000Z",
        quality=4,
        satellites=19,
        age_s=1.0,
        hdop=0.7,
    )
    return dataclasses.replace(state, **changes)


CONVERGENCE = Convergence(
    [60.0 * k for k in range(1, 15)],
    [0.004 / k for k in range(1, 15)],
    [0.003 / k for k in range(1, 15)],
    [None, *[0.010 / k for k in range(2, 15)]],
    [0.060 / k**0.5 for k in range(1, 15)],
    [None, *[0.080 / k**0.5 for k in range(2, 15)]],
    "2027-03-04T08:09:00.000Z",
)


class FakeBridge(Bridge):
    """A bridge without a book: keeps what was written, and builds the picture from it."""

    def __init__(self, *, with_session: bool = True, recording: bool = False, ended: bool = False) -> None:
        super().__init__(Path("kestrel.book"), FakeClock(0, NOW_MS))
        self.written: list[Entry] = []
        self.session_tree: Tree | None = SESSION_TREE if with_session else None
        self.state = BookState("00000000-0000-4000-8000-000000000001", 0, GENESIS, "2027-03-04T08:00:00.000Z", None)
        self.alive = recording
        self.silence_s: float | None = 0.4 if recording else None
        self.reduction: Reduction | None = reduction(opened=recording) if recording or ended else None
        self.problem: tuple[str, str, str] | None = None
        self.recorder: RecorderState | None = recorder() if recording or ended else None
        self.trace: Trace | None = trace() if recording or ended else None
        self.calls: list[tuple[str, Any]] = []
        self.missing_texts: list[str] = []
        self.told: FramesTold | None = FramesTold(
            "-34.27430, 146.05185, the receiver's position in occupation 1, epoch 2027.17",
            ("receiver  EPSG:7912 ITRF2014, moving", "client    EPSG:7843 GDA2020, static", "effect    E -152.6 mm"),
            ("What corrects this receiver? Our own base.", "Ask: the certificate of the base mark."),
        )
        self._entry("book", {"id": self.state.id, "format": 1, "program": "fieldbook 0.1"}, "R. Kell")
        if with_session:
            self._entry("session", {"tree": SESSION_TREE}, "R. Kell")
            self._entry("mark", SESSION_TREE["mark"], "R. Kell")
        if recording or ended:
            self._entry(
                "occupation",
                {
                    "occupation": 1,
                    "mark": "KR-07",
                    "session": SESSION_TREE,
                    "link": "sim:rtk?seed=7",
                    "simulated": True,
                },
                "R. Kell",
            )
            self._entry("raw", {"occupation": 1, "chunk": 1, "bytes": 12345}, "")
            self.state.occupations[1] = occupation(1, ended="operator" if ended else None)

    def frames(self) -> FramesTold:
        if self.told is None:
            raise UsageError("kestrel.book knows no place yet.", "Say where.")
        return self.told

    def _entry(self, kind: str, body: Tree, observer: str) -> Entry:
        seq = len(self.written) + 1
        utc = utc_text(NOW_MS - 1_000_000 + 1000 * seq)
        previous = self.written[-1].hash if self.written else GENESIS
        entry = Entry(
            seq,
            utc,
            kind,
            body,
            observer,
            previous,
            entry_hash(seq, utc, kind, canonical_json(body), observer, previous),
        )
        self.written.append(entry)
        self._fold(entry)
        return entry

    def _fold(self, entry: Entry) -> None:
        state, body = self.state, entry.body
        state.head_seq, state.head_hash = entry.seq, entry.hash
        if entry.kind == "session":
            state.session = session_from_tree(body["tree"])
        elif entry.kind == "mark":
            state.marks[body["name"]] = body
        elif entry.kind == "strike":
            state.strikes[body["seq"]] = entry
        elif entry.kind == "remark" and body["occupation"] is not None:
            state.occupations[body["occupation"]].remarks.append(entry)
        elif entry.kind == "remark":
            state.remarks.append(entry)
        elif entry.kind == "height":
            tree = {key: value for key, value in body.items() if key != "occupation"}
            state.occupations[body["occupation"]].heights.append(reading_from_tree(tree, entry.seq))
        elif entry.kind in ("certificate", "draft"):
            state.documents.append(entry)

    # looking

    def snapshot(self) -> LiveView:
        opened = self.state.open_occupation
        shown = opened or next(reversed(self.state.occupations.values()), None)
        state = dataclasses.replace(
            self.state,
            occupations=dict(self.state.occupations),
            marks=dict(self.state.marks),
            strikes=dict(self.state.strikes),
            documents=list(self.state.documents),
        )
        return LiveView(
            state,
            shown,
            self.recorder,
            self.alive,
            self.silence_s,
            842.0 if shown else None,
            self.reduction if shown else None,
            self.problem,
            self.trace if shown else None,
            4.0,
            4.4,
            CONVERGENCE if self.wants_running and shown else None,
        )

    def add_alarm(self, occupation: int | None, code: str, text: str, *, acknowledged: bool) -> Entry | None:
        self.calls.append(("alarm", (occupation, code, acknowledged)))
        return None

    def entries(self) -> list[Entry]:
        return list(self.written)

    def reduce(self) -> Reduced:
        made = [
            Sheet(reduction(item.mark, item.number, opened=item.open), (item.number,))
            for item in self.state.occupations.values()
        ]
        return Reduced(tuple(made))

    def ports(self) -> list[Port]:
        return [Port("/dev/ttyUSB0", "USB serial adapter", "serial:///dev/ttyUSB0?baud=115200")]

    def link_problem(self, text: str) -> str:
        return "" if ":" in text else "This is no link. Write serial:, tcp:, udp:, file: or sim:."

    def session_file(self, path_text: str) -> Tree:
        if not path_text.endswith(".toml"):
            raise UsageError(f"The session file {path_text} cannot be read.", "Check the path.")
        return SESSION_TREE

    # writing

    def write(self, kind: str, body: Tree) -> Entry:
        self.calls.append((kind, body))
        return self._entry(kind, body, self._signed())

    def begin(self, tree: Tree) -> tuple[int, bool]:
        self.calls.append(("begin", tree))
        number = len(self.state.occupations) + 1
        self._entry(
            "occupation",
            {"occupation": number, "mark": tree["mark"]["name"], "session": tree, "link": tree["receiver"]["link"]},
            self._signed(),
        )
        self.state.occupations[number] = occupation(number, tree=tree)
        self.recorder, self.trace, self.reduction = recorder(), trace(), reduction(tree["mark"]["name"], number)
        self.alive, self.silence_s = True, 0.4
        return number, False

    def start_recorder(self, occupation: int) -> None:
        self.calls.append(("start_recorder", occupation))
        self.alive = True

    def end(self, occupation: int, left_open: Sequence[tuple[str, str]] = ()) -> None:
        self.left_open = list(left_open)
        self.calls.append(("end", occupation))
        self.state.occupations[occupation].ended_by = "operator"
        self._entry("end", {"occupation": occupation, "by": "operator", "epochs": 861}, self._signed())
        self.alive = False

    # paper

    def missing(self, sheet: Sheet) -> list[str]:
        return list(self.missing_texts)

    def certify(self, mark: str, occupation: int | None, out: str, sign_off: str, supersede: str) -> Issued:
        self.calls.append(("certify", (mark, occupation, out, sign_off, supersede)))
        number = "00000000-1" if sign_off else None
        self._entry(
            "certificate" if sign_off else "draft",
            {"number": number, "mark": mark, "occupation": occupation, "digest": "d"},
            self._signed(),
        )
        return Issued(out, number)


HOSTILE = {
    "markup": "[bold red]x[/bold red] [@click=app.quit]y[/]",
    "escapes": "\x1b[31mred\x1b[0m\x07\x9b2J\r\nnext\x00",
    "long": "L" * 300,
    "right_to_left": "\u202eevil \u05e9\u05dc\u05d5\u05dd \u0645\u0631\u062d\u0628\u0627",
    "wide": "\u6e2c\u91cf\u9ede\u4e00\u53f7 \u3053\u3093\u306b\u3061\u306f",
}
