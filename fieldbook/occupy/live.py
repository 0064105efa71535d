"""One frozen picture of a book while it is recorded: pulled by whoever shows it, at its own pace.

The reader keeps the state of one reduction and pushes only the epochs that are new; the live figure is therefore the
figure a later reduction of the same epochs gives, to the last bit (the pattern of a calibrated antenna apart: its sky
is read again only when a tenth more has been heard). It opens the book for reading, in the thread that
uses it, and neither delays nor is seen by the recorder.
"""

from __future__ import annotations

from pathlib import Path

from fieldbook.book.lock import held
from fieldbook.book.store import Book
from fieldbook.clock import Clock, SystemClock
from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.live import LiveView
from fieldbook.model.reduction import Convergence
from fieldbook.model.sky import Picture
from fieldbook.model.state import BookState, Occupation
from fieldbook.occupy.reductions import judge, others_of, pictures_of, reduce_one, search_dirs
from fieldbook.reduce.occupation import OccupationReducer, Reduced

RUNNING_EVERY_S = 15.0  # the running mean costs a fifth of a second: one in fifteen seconds is little
MOST_EPOCHS_A_LOOK = 50_000  # a long occupation opened late comes in pieces: every look answers soon


class LiveReader:
    """Use from one thread only; `close` when done.

    Args:
        path: the book.
        clock: for the age of the last byte.
    """

    def __init__(self, path: Path, clock: Clock | None = None) -> None:
        self._path = path
        self._clock = clock or SystemClock()
        self._book: Book | None = None
        self._version = -1
        self._occupation = 0
        self._rows = 0
        self._reducer: OccupationReducer | None = None
        self._pictures: tuple[int, list[Picture] | None] = (0, None)
        self._last: tuple[Reduced | None, tuple[str, str, str] | None] = (None, None)
        self._siblings: tuple[int, int, list[Reduced]] = (-1, -1, [])
        self._running: tuple[Reduced | None, float, Convergence | None] = (None, 0.0, None)
        self.wants_running = False  # set by who shows the running mean
        self._first_instant_ms: int | None = None
        self._last_instant_ms: int | None = None

    def close(self) -> None:
        """Give the book back."""
        if self._book is not None:
            self._book.close()
            self._book = None

    def snapshot(self) -> LiveView:
        """The book as it stands now.

        Raises:
            BookError: no book there, newer, damaged, busy.
        """
        book = self._opened()
        version = book.data_version()
        state = book.state()
        occupation = state.open_occupation or next(reversed(state.occupations.values()), None)
        if occupation is not None and (version != self._version or self._behind(book, occupation)):
            self._last = self._reduced(book, state, occupation)
        self._version = version
        return self._view(book, state, occupation)

    def _opened(self) -> Book:
        if self._book is None:
            self._book = Book.open(self._path, clock=self._clock)
        return self._book

    def _behind(self, book: Book, occupation: Occupation) -> bool:
        heard = book.recorder_state()
        return heard is not None and heard.occupation == occupation.number and heard.epochs > self._rows

    def _reduced(
        self, book: Book, state: BookState, occupation: Occupation
    ) -> tuple[Reduced | None, tuple[str, str, str] | None]:
        if self._reducer is None or occupation.number != self._occupation or not self._reducer.fits(occupation):
            self._reducer, self._occupation, self._rows = OccupationReducer(occupation), occupation.number, 0
            self._pictures = (0, None)
            self._first_instant_ms = self._last_instant_ms = None
        rows = book.epochs(occupation.number, after=self._rows, limit=MOST_EPOCHS_A_LOOK)
        if rows:
            self._reducer.push(rows)
            self._rows = rows[-1].number
            instants = [row.instant_ms for row in rows if row.instant_ms is not None and row.code is None]
            if instants:
                self._first_instant_ms = instants[0] if self._first_instant_ms is None else self._first_instant_ms
                self._last_instant_ms = instants[-1]
        try:
            reduced = self._reducer.evaluate(occupation, search_dirs(book), self._sky(book, occupation))
        except (ReductionError, UsageError) as error:
            return None, (error.code, error.text, error.remedy)
        others = self._others(book, state, occupation)
        judge(reduced, occupation, others_of(reduced, [reduced, *others], occupation.session.requirement), state.marks)
        return reduced, None

    def _sky(self, book: Book, occupation: Occupation) -> list[Picture] | None:
        """Pictures of the sky for a calibrated antenna: read again when a tenth more has been heard, and at the end."""
        heard, pictures = self._pictures
        if self._rows > 1.1 * heard or not occupation.open:
            pictures = pictures_of(book, occupation)
            self._pictures = (self._rows, pictures)
        return pictures

    def _others(self, book: Book, state: BookState, occupation: Occupation) -> list[Reduced]:
        """The mark's ended occupations: reduced once, as nothing is added to them while another one is open."""
        key = (occupation.number, sum(item.entry_seq for item in state.of_mark(occupation.mark)))
        if self._siblings[:2] != key:
            found = []
            for other in state.of_mark(occupation.mark):
                if other.number != occupation.number and not other.open:
                    try:
                        found.append(reduce_one(book, other))
                    except (ReductionError, UsageError):
                        continue  # what cannot be reduced does not count as an occupation of the mark
            self._siblings = (*key, found)
        return self._siblings[2]

    def _convergence(self, reduced: Reduced | None) -> Convergence | None:
        """The running mean, made anew every so often and when the occupation is another one or has ended."""
        if reduced is None or not self.wants_running:
            return None
        made_of, made_s, found = self._running
        now_s = self._clock.monotonic_ms() / 1000.0
        if made_of is not reduced:
            same = made_of is not None and made_of.reduction.occupation == reduced.reduction.occupation
            if not same or not reduced.reduction.open or now_s - made_s >= RUNNING_EVERY_S:
                found = reduced.convergence()
                self._running = (reduced, now_s, found)
        return found

    def _view(self, book: Book, state: BookState, occupation: Occupation | None) -> LiveView:
        heard = book.recorder_state()
        if heard is not None and (occupation is None or heard.occupation != occupation.number):
            heard = None
        alive = occupation is not None and occupation.open and held(self._path)
        silence_s = None
        if alive and heard is not None and heard.last_byte_utc_ms is not None:
            silence_s = max(0.0, (self._clock.utc_ms() - heard.last_byte_utc_ms) / 1000)
        reduced, problem = self._last if occupation is not None else (None, None)
        elapsed_s = None
        if self._first_instant_ms is not None and self._last_instant_ms is not None:
            elapsed_s = (self._last_instant_ms - self._first_instant_ms) / 1000
        return LiveView(
            state=state,
            occupation=occupation,
            recorder=heard,
            recorder_alive=alive,
            silence_s=silence_s,
            elapsed_s=elapsed_s,
            reduction=None if reduced is None else reduced.reduction,
            problem=problem,
            trace=None if reduced is None else reduced.trace,
            effective_epochs=None if reduced is None else reduced.mean.independent_epochs,
            correlation_lengths=None if reduced is None else reduced.mean.ratio,
            convergence=self._convergence(reduced),
        )
