"""The writer on a real book with a clock that stands still: restore, retry, seal, options changed by an entry."""

from __future__ import annotations

from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import FakeClock
from fieldbook.errors import BookError
from fieldbook.model.item import Item, ItemKind
from fieldbook.occupy import writer as writer_module
from fieldbook.occupy.rebuild import compare, occupation_of
from fieldbook.occupy.restore import Meanwhile, catch_up
from fieldbook.occupy.spans import Claimed, Span
from fieldbook.occupy.writer import Writer
from fieldbook.settings.session import load_session

from .conftest import epoch


@pytest.fixture
def clock() -> FakeClock:
    return FakeClock(1_000_000, 1_803_000_000_000)


@pytest.fixture
def book(tmp_path: Path, session: Path, clock: FakeClock):
    tree = load_session(session).tree
    with Book.create(tmp_path / "job.book", clock=clock, observer="R. Kell") as made:
        body = {"occupation": 1, "mark": "KR-07", "session": tree, "link": "tcp://h.invalid:1", "simulated": False}
        made.append("occupation", body, "R. Kell")
        yield made


def new_writer(book: Book, clock: FakeClock, **how: object) -> Writer:
    return Writer(book, occupation_of(book, 1), clock, **how)  # type: ignore[arg-type]


def received(clock: FakeClock, data: bytes) -> Item:
    clock.advance(100)
    return Item(ItemKind.BYTES, data, clock.monotonic_ms(), clock.utc_ms())


def kinds(book: Book) -> list[str]:
    return [entry.kind for entry in book.entries()]


def test_sixty_rows_or_sixty_seconds_seal(book, clock) -> None:
    writer = new_writer(book, clock)
    for index in range(60):
        writer.write([received(clock, epoch(index))])
    assert kinds(book).count("raw") == 1
    writer.write([received(clock, epoch(60))])
    writer.seal_if_due()
    assert kinds(book).count("raw") == 1
    clock.advance(60_000)
    writer.seal_if_due()
    assert kinds(book).count("raw") == 2
    writer.seal_if_due()
    assert kinds(book).count("raw") == 2, "nothing to seal, nothing is written"


def test_a_new_writer_goes_on_where_the_old_one_stopped(book, clock) -> None:
    first = new_writer(book, clock)
    pieces = [epoch(index) for index in range(30)]
    for piece in pieces[:20]:
        first.write([received(clock, piece)])
    stored = len(book.epochs(1))
    book.write_burst(1, [received(clock, pieces[20]), received(clock, pieces[21])])  # raw only: epochs may lag
    second = new_writer(book, clock)
    catch_up(second, book, 1)
    assert len(book.epochs(1)) == stored + 2
    assert second.heard.received_bytes == sum(len(piece) for piece in pieces[:22])
    for piece in pieces[22:]:
        second.write([received(clock, piece)])
    second.finish("operator", live=True)
    assert compare(book, 1) == []
    assert len(book.epochs(1)) == 30
    end = next(entry.body for entry in book.entries() if entry.kind == "end")
    assert end["received_sha256"] == second.received_sha256 == book.received_digest(1)[1]


def test_epochs_that_no_longer_fit_are_replaced(book, clock) -> None:
    first = new_writer(book, clock)
    for index in range(10):
        first.write([received(clock, epoch(index))])
    epochs = book.epochs(1)
    epochs[-1].satellites = 3
    book.replace_epochs(1, epochs)
    catch_up(new_writer(book, clock), book, 1)
    assert compare(book, 1) == []


def test_gap_entries_tell_reason_and_length(book, clock) -> None:
    writer = new_writer(book, clock)
    writer.write([received(clock, epoch(0))])
    clock.advance(400)
    writer.write([Item(ItemKind.LOST, b"pulled", clock.monotonic_ms(), clock.utc_ms())])
    clock.advance(12_000)
    writer.write([Item(ItemKind.REOPENED, b"tcp", clock.monotonic_ms(), clock.utc_ms())])
    gap = next(entry.body for entry in book.entries() if entry.kind == "gap")
    assert (gap["reason"], gap["seconds"]) == ("pulled", "12.4")
    again = new_writer(book, clock)
    clock.advance(65_000)
    start = Item(ItemKind.STARTED, b"x", clock.monotonic_ms(), clock.utc_ms())
    arrived = [start, Item(ItemKind.REOPENED, b"tcp", clock.monotonic_ms(), clock.utc_ms())]
    catch_up(again, book, 1, Meanwhile(start, lambda: [arrived.pop(0)] if arrived else []))
    told = [entry.body for entry in book.entries() if entry.kind in ("gap", "resumed")]
    assert [body.get("reason") for body in told] == ["pulled", None, "recorder stopped"]
    assert told[1]["after_s"] == 65
    assert told[2]["seconds"] == "77.4", "since the last byte, not since the last event"


class Stubborn:
    """A book whose first commits fail."""

    def __init__(self, book: Book, failures: int, code: str) -> None:
        self._book, self.failures, self._code = book, failures, code

    def __getattr__(self, name: str) -> object:
        return getattr(self._book, name)

    def write_burst(self, *arguments: object) -> None:
        if self.failures:
            self.failures -= 1
            raise BookError("no", "wait", code=self._code)
        self._book.write_burst(*arguments)  # type: ignore[arg-type]


def test_a_full_disk_is_waited_for_and_nothing_is_lost(book, clock, monkeypatch) -> None:
    monkeypatch.setattr(writer_module, "RETRY_S", 0.001)
    writer = new_writer(Stubborn(book, 3, "disk_full"), clock)
    for index in range(5):
        writer.write([received(clock, epoch(index))])
    assert b"".join(book.received(1)) == b"".join(epoch(index) for index in range(5))


def test_what_will_not_pass_is_raised_at_once(book, clock) -> None:
    with pytest.raises(BookError):
        new_writer(Stubborn(book, 1, "damaged"), clock).write([received(clock, epoch(0))])
    impatient = new_writer(Stubborn(book, 1, "busy"), clock, patience=lambda: False)
    with pytest.raises(BookError):
        impatient.write([received(clock, epoch(0))])


def test_a_live_overlap_is_recorded_with_a_finding_once(book, clock) -> None:
    span = Span()
    day = 1_804_118_400_000  # 2027-03-04T00:00:00Z
    other = Claimed(7, "KR-07", day + 3_600_500, day + 3_700_000, same_mark=True)
    writer = new_writer(book, clock, claimed=[other])
    for index in range(20):
        writer.write([received(clock, epoch(index))])
    writer.finish("operator", live=True)
    found = [entry.body for entry in book.entries() if entry.kind == "finding"]
    assert [(body["code"], body["severity"]) for body in found] == [("overlap", "stop")]
    assert found[0]["figures"] == {"with_occupation": 7}
    assert writer.findings[0]["code"] == "overlap"
    assert span.utc_ms(None) is None
    days = [entry.body for entry in book.entries() if entry.kind == "date"]
    assert [body["date"] for body in days] == ["2027-03-04"]


def test_an_option_changed_by_an_entry_decodes_everything_again(book, clock) -> None:
    writer = new_writer(book, clock)
    for index in range(5):
        writer.write([received(clock, epoch(index))])
    book.append("decision", {"occupation": 1, "talker": "GP", "reason": "two receivers"}, "R. Kell")
    writer.options_changed(occupation_of(book, 1))
    for index in range(5, 10):
        writer.write([received(clock, epoch(index))])
    writer.finish("operator", live=True)
    assert compare(book, 1) == []
    assert {item.source for item in book.epochs(1)} <= {"RMC"}, "no GGA of the other talker is heard any more"


def test_the_heartbeat_tells_the_head_line(book, clock) -> None:
    writer = new_writer(book, clock)
    for index in range(5):
        writer.write([received(clock, epoch(index))])
    writer.show_state(now=True)
    state = book.recorder_state()
    assert state is not None
    assert (state.occupation, state.mark, state.quality, state.satellites) == (1, "KR-07", 4, 20)
    assert (state.hdop, state.age_s, state.station) == (0.7, 1.0, "0061")
    assert state.fix_utc == "2027-03-04T01:00:00.200Z", "the latest epoch that is final"
    assert state.received_bytes == sum(len(epoch(index)) for index in range(5))
    assert state.last_commit_took_ms is not None


def test_new_bursts_are_committed_while_the_past_is_decoded(book, clock) -> None:
    first = new_writer(book, clock)
    for index in range(50):
        first.write([received(clock, epoch(index))])
    start = Item(ItemKind.STARTED, b"x", clock.monotonic_ms(), clock.utc_ms())
    arrived = [start, Item(ItemKind.REOPENED, b"tcp", clock.monotonic_ms(), clock.utc_ms())]
    arrived += [received(clock, epoch(index)) for index in range(50, 70)]
    raw_before_its_epochs = []

    def take() -> list[Item]:
        raw_before_its_epochs.append(len(list(book.received(1))) - len(book.epochs(1)))
        return [arrived.pop(0)] if arrived else []

    second = new_writer(book, clock)
    catch_up(second, book, 1, Meanwhile(start, take))
    assert max(raw_before_its_epochs) > 15, "raw rows first; epochs may lag"
    second.write([received(clock, epoch(70))])
    second.finish("operator", live=True)
    assert compare(book, 1) == []
    assert len(book.epochs(1)) == 71
    assert [entry.kind for entry in book.entries() if entry.kind in ("resumed", "gap")] == ["resumed", "gap"]
