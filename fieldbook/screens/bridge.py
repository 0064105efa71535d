"""The one door between the screens and the book, the recorder, the reduction and the certificate.

Every method here may wait for a disk and is called from a worker thread, never from the drawing. Each opens the
book for itself and closes it again, so no connection crosses a thread. Errors are `FieldbookError`s with a remedy.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

from fieldbook.clock import Clock, SystemClock
from fieldbook.errors import FieldbookError, UsageError
from fieldbook.model.canonical import Tree, normalised
from fieldbook.model.entry import Entry
from fieldbook.model.live import LiveView
from fieldbook.model.reduction import AntennaHeight, Finding
from fieldbook.model.session import Session
from fieldbook.screens.sheets import Reduced, Sheet, reduced_sheets
from fieldbook.settings.profiles import Profile, profiles

if TYPE_CHECKING:
    from fieldbook.occupy.live import LiveReader
    from fieldbook.signing.signer import Signer


ALARMS_LOOK_BACK = 100  # entries; two screens tell of an alarm within seconds of each other


@dataclass(frozen=True)
class Port:
    """A port of this computer, listed without opening it."""

    name: str
    description: str
    address: str  # how to write it as a link


@dataclass(frozen=True)
class Issued:
    """What came of a certificate or draft."""

    path: str
    number: str | None  # None: a draft
    missing: tuple[str, ...] = ()  # what keeps it a draft


@dataclass(frozen=True)
class Heights:
    """Height readings judged together."""

    height: AntennaHeight | None
    findings: tuple[Finding, ...] = ()
    problem: str = ""


@dataclass(frozen=True)
class FramesTold:
    """The book's pair of frames in lines, label in the first ten columns; and what the corrections ask for."""

    place: str
    pair: tuple[str, ...]
    question: tuple[str, ...]


@dataclass
class Bridge:
    """A book on disk, as the screens see it."""

    path: Path
    clock: Clock = field(default_factory=SystemClock)
    observer: str = ""  # who signs; empty until a session or a person says so
    wants_running: bool = False  # a page shows the running mean: make it, in the feed's thread
    signature: str = ""  # what is known of the observer's key, in words; kept up by the feed
    _looked_for: str | None = None
    _reader: LiveReader | None = None

    # --- looking

    def snapshot(self) -> LiveView:
        """One frozen picture, from the feed's own thread only."""
        from fieldbook.occupy.live import LiveReader

        if self._reader is None:
            self._reader = LiveReader(self.path, self.clock)
        self._reader.wants_running = self.wants_running
        if self._looked_for != self.observer:
            self._look_for_key()
        return self._reader.snapshot()

    def _look_for_key(self) -> None:
        from fieldbook.signing.message import spoken
        from fieldbook.signing.signer import signer_without_asking

        name = self.observer
        signer, why = signer_without_asking(name) if name.strip() else (None, "")
        self.signature = f"key {spoken(signer.fingerprint)}" if signer is not None else why and f"unsigned: {why}"
        self._looked_for = name

    def close(self) -> None:
        """Let go of the reader, in the thread that used it."""
        reader, self._reader = self._reader, None
        if reader is not None:
            reader.close()

    def entries(self) -> list[Entry]:
        """All entries of the book, in order."""
        from fieldbook.book.store import Book

        with Book.open(self.path, clock=self.clock) as book:
            return list(book.entries())

    def reduce(self) -> Reduced:
        """Every occupation of the book, and every mark with several of them, reduced."""
        from fieldbook.book.store import Book

        with Book.open(self.path, clock=self.clock) as book:
            return reduced_sheets(book)

    def heights(self, session: Session, readings: Sequence[Tree], *, explained: bool = False) -> Heights:
        """Readings (keys of [[setup.height]]) reduced to the ARP and judged; pure, no disk.

        Args:
            explained: a decision says why they differ; the finding stays, as information.
        """
        from fieldbook.reduce.antenna import reduce_antenna
        from fieldbook.settings.session import reading_from_tree

        try:
            items = [reading_from_tree(item) for item in readings]
            # the heights alone are asked for: no sky is read, no pattern taken off
            made = reduce_antenna(
                session.setup, session.antenna, items, difference_explained=explained, carrier_phase=False
            )
        except FieldbookError as problem:
            return Heights(None, (), f"{problem.text} {problem.remedy}")
        return Heights(made.height, tuple(made.findings))

    def session(self, tree: Tree) -> Session:
        """A session tree, checked."""
        from fieldbook.settings.session import session_from_tree

        return session_from_tree(tree)

    def antenna_names(self) -> list[str]:
        """Names of the user's own antennas."""
        from fieldbook.settings.antennas import listed_names

        return listed_names()

    def antenna_from_list(self, name: str, frequency: str) -> Tree:
        """Keys of [antenna] as listed under a name; of a calibration also the offset that these signals have.

        Raises:
            UsageError: no such name, a broken file, or no signals that the calibration has.
        """
        from fieldbook.settings.antennas import listed_antenna

        kept: Tree = normalised({**listed_antenna(name), "listed": name})
        if "calibration" in kept:
            kept["arp_to_phase_centre_m"] = self.calibrated_offset(kept["calibration"], frequency)
            kept["antex"] = kept["calibration"]["file"]
        return kept

    def calibrated_offset(self, kept: Tree, frequency: str) -> Tree:
        """ARP to phase centre of these signals, from the calibration kept in a session.

        Raises:
            UsageError: no signals that the calibration has.
        """
        from fieldbook.model.frequencies import combination
        from fieldbook.settings.antenna_rules import combined_offset
        from fieldbook.settings.antex import block_calibration

        found = block_calibration(kept["block"], kept["file"])
        try:
            offset = combined_offset(found, combination(frequency))
        except (ValueError, KeyError) as problem:
            have = ", ".join(item.code for item in found.frequencies)
            raise UsageError(
                f"Say which signals the position is computed from ({problem}).", f"The calibration has {have}."
            ) from None
        return {part: f"{value:.5f}" for part, value in zip(("north", "east", "up"), offset, strict=True)}

    def session_file(self, path_text: str) -> Tree:
        """The tree of a session file, its link made independent of the folder the file lies in; its frames checked."""
        from fieldbook.links.address import parse_link
        from fieldbook.occupy.frame_check import check_session_frames
        from fieldbook.settings.session import load_session

        path = Path(path_text).expanduser()
        session = load_session(path)
        check_session_frames(session, path.absolute().parent)
        tree = session.tree
        link = parse_link(tree["receiver"]["link"], path.absolute().parent).text
        return {**tree, "receiver": {**tree["receiver"], "link": link}}

    def link_problem(self, text: str) -> str:
        """What is wrong with a link as typed; empty if nothing is. Nothing is opened."""
        from fieldbook.links.address import parse_link

        try:
            parse_link(text, Path.cwd())
        except FieldbookError as problem:
            return f"{problem.text} {problem.remedy}"
        return ""

    def profiles(self) -> dict[str, Profile]:
        """Requirements by published documents, the office's own included."""
        return profiles()

    def ports(self) -> list[Port]:
        """Ports of this computer; none is opened."""
        from fieldbook.links.ports import list_ports

        return [Port(item.device, item.description, item.address) for item in list_ports()]

    def frames(self) -> FramesTold:
        """What leads from the receiver's frame to the client's where this book's receiver stands.

        Raises:
            UsageError: no session yet, or no place.
        """
        from datetime import UTC, datetime

        from fieldbook.book.store import Book
        from fieldbook.occupy.frame_words import answer_lines, pair_lines
        from fieldbook.occupy.where import whereabouts
        from fieldbook.reduce.frames import answer, decimal_year, pair_at, plausible, use_grid_folders
        from fieldbook.settings.grids import grid_folders

        with Book.open(self.path, clock=self.clock) as book:
            where = whereabouts(book)
        session = where.session
        if session is None:
            raise UsageError("This book has no session yet, so no frames.", "Press 1, then F.")
        use_grid_folders(grid_folders(self.path.resolve().parent))
        epoch = decimal_year(where.day or datetime.fromtimestamp(self.clock.utc_ms() / 1000, UTC))
        pair = pair_at(session.frame, where.lat_deg, where.lon_deg, 0.0, epoch)
        asked = answer(session.corrections.kind)
        place = (where.lat_deg, where.lon_deg)
        return FramesTold(
            f"{where.lat_deg:.5f}, {where.lon_deg:.5f}, {where.said}, epoch {epoch:.2f}",
            tuple(pair_lines(pair)),
            tuple(answer_lines(asked, plausible(asked, place)[:8], place_known=True)),
        )

    # --- writing

    def _signed(self) -> str:
        if not self.observer.strip():
            raise UsageError("Nobody signs yet.", "Press 1, then O, and say who observes.")
        return self.observer

    def _signer(self, name: str) -> Signer | None:
        """The key of a person, if it can be used without asking."""
        from fieldbook.signing.signer import signer_without_asking

        return signer_without_asking(name)[0]

    def write(self, kind: str, body: Tree) -> Entry:
        """One entry in the observer's name, signed with the observer's key if there is one."""
        from fieldbook.book.store import Book
        from fieldbook.signing.in_book import signed_by

        observer = self._signed()
        signer = self._signer(observer)
        with Book.open(self.path, clock=self.clock, write=True) as book, signed_by(book, signer):
            return book.append(kind, body, observer)

    def save_session(self, tree: Tree) -> Entry:
        """What the screen offers for the next occupation."""
        return self.write("session", {"tree": self.session(tree).tree})

    def add_mark(self, tree: Tree) -> Entry:
        """A mark described."""
        return self.write("mark", tree)

    def add_remark(self, occupation: int | None, text: str) -> Entry:
        """A remark, at any moment."""
        return self.write("remark", {"occupation": occupation, "text": text})

    def add_alarm(self, occupation: int | None, code: str, text: str, *, acknowledged: bool) -> Entry | None:
        """An alarm that the screen raised, or that somebody has seen; an unsigned one is the program's own.

        Returns:
            None where another screen on this book has raised it already.
        """
        from fieldbook.book.store import Book

        body = {"occupation": occupation, "code": code, "text": text, "acknowledged": acknowledged}
        with Book.open(self.path, clock=self.clock, write=True) as book:
            latest = [entry.body for entry in book.entries(book.state().head_seq - ALARMS_LOOK_BACK)]
            told = next(
                (old for old in reversed(latest) if (old.get("code"), old.get("occupation")) == (code, occupation)),
                None,
            )
            if not acknowledged and told is not None and not told.get("acknowledged", True):
                return None
            return book.append("alarm", body, self.observer.strip() if acknowledged and self.observer else "screen")

    def add_height(self, occupation: int, tree: Tree) -> Entry:
        """A height reading of an occupation that has begun."""
        return self.write("height", {"occupation": occupation, **tree})

    def explain_heights(self, occupation: int, reason: str) -> Entry:
        """The decision that readings which differ stand, and why."""
        return self.write("decision", {"occupation": occupation, "height_difference": "explained", "reason": reason})

    def add_setup(self, occupation: int, changes: Tree) -> Entry:
        """Changed keys of an occupation that has begun, as {table: {key: value}}."""
        return self.write("setup", {"occupation": occupation, **changes})

    def strikeable(self, entry: Entry) -> bool:
        """Whether a person may strike the entry out: what a person wrote, never what a machine recorded."""
        from fieldbook.book.kinds import STRIKABLE

        return entry.kind in STRIKABLE

    def strike(self, seq: int, reason: str) -> Entry:
        """An entry struck out, with its reason."""
        return self.write("strike", {"seq": seq, "reason": reason})

    # --- recording

    def begin(self, tree: Tree) -> tuple[int, bool]:
        """Begin the occupation a session tree describes and start its recorder; the readings are not carried over.

        Returns:
            Number of the occupation, and whether an open one was resumed.
        """
        from fieldbook.book.store import Book
        from fieldbook.occupy.begin import begin_occupation
        from fieldbook.occupy.detached import start_recorder
        from fieldbook.occupy.frame_check import check_session_frames

        self._signed()
        session = self.session(tree)
        check_session_frames(session, self.path.resolve().parent)
        with Book.open(self.path, clock=self.clock, write=True) as book:
            signer = self._signer(session.job.observer)
            number, resumed = begin_occupation(book, session, session.receiver.link, signer=signer)
        start_recorder(self.path, number)
        return number, resumed

    def start_recorder(self, occupation: int) -> None:
        """Start the recorder of an occupation that was left open."""
        from fieldbook.occupy.detached import start_recorder

        start_recorder(self.path, occupation)

    def end(self, occupation: int, left_open: Sequence[tuple[str, str]] = ()) -> None:
        """End the open occupation: by request where a recorder runs, else directly.

        Args:
            left_open: lines of the leave check that are not met, and why it is left all the same: decisions.
        """
        from fieldbook.book.store import Book
        from fieldbook.occupy.ending import request_end
        from fieldbook.signing.in_book import sign_head

        observer = self._signed()
        for line, reason in left_open:
            self.write("decision", {"occupation": occupation, "not_met": line, "reason": reason})
        request_end(self.path, occupation, observer)
        signer = self._signer(observer)
        if signer is not None:
            with Book.open(self.path, clock=self.clock, write=True) as book:
                sign_head(book, signer)

    # --- paper

    def certify(self, mark: str, occupation: int | None, out: str, sign_off: str, supersede: str) -> Issued:
        """Issue a certificate (with a sign-off) or write a draft (without). An existing file is refused.

        Args:
            occupation: None = all of the mark together.
        """
        from fieldbook.book.store import Book
        from fieldbook.certificate.facts import parse_sign_off
        from fieldbook.issuing import issue

        signed_off = parse_sign_off(sign_off or None)
        with Book.open(self.path, clock=self.clock, write=True) as book:
            made = issue(
                book,
                mark,
                Path(out).expanduser(),
                occupation=occupation,
                sign_off=sign_off or None,
                supersede=supersede or None,
                signer=self._signer(signed_off["name"]) if signed_off else None,
                clock=self.clock,
            )
        return Issued(str(made.path), made.number, tuple(made.missing))

    def write_text(self, out: str, text: str) -> str:
        """One line of text as a new file; its path. An existing file is refused."""
        path = Path(out).expanduser()
        try:
            with path.open("x", encoding="utf-8") as file:
                file.write(text + "\n")
        except FileExistsError:
            raise UsageError(f"{path} exists already.", "Choose another name.", code="out_exists") from None
        except OSError as problem:
            raise UsageError(f"{path} cannot be written: {problem.strerror or problem}.", "Check the folder.") from None
        return str(path)

    def missing(self, sheet: Sheet) -> list[str]:
        """What keeps the paper a draft, besides the sign-off."""
        from fieldbook.book.store import Book
        from fieldbook.certificate.facts import missing_items

        if sheet.result is not None:
            return list(sheet.missing)
        with Book.open(self.path, clock=self.clock) as book:
            occupation = book.state().occupations[sheet.numbers[0]]
        return [str(item["text"]) for item in missing_items(occupation, sheet.reduction, signed=True)]
