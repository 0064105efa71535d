"""Epoch -> row -> Epoch is exact, whatever the decoder may give."""

from __future__ import annotations

import dataclasses
from pathlib import Path

import small_books as small
from any_epochs import any_epoch, numbered
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fieldbook.book import epochs as rows
from fieldbook.book.store import Book
from fieldbook.model.epoch import Epoch


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(any_epoch, max_size=12), st.integers(0, 12))
def test_epochs_come_back_exactly(tmp_path_factory, epochs: list[Epoch], first_burst: int) -> None:
    epochs = numbered(epochs)
    path = tmp_path_factory.mktemp("epochs") / "a.book"
    with small.begun(path) as book:
        book.write_burst(1, [], epochs[:first_burst])
        book.write_burst(1, [], epochs[first_burst:])
        assert book.epochs(1) == epochs
        again = [dataclasses.replace(epoch, talker="GP") for epoch in epochs]
        book.replace_epochs(1, again)
        assert book.epochs(1) == again


def test_the_row_holds_every_field_of_an_epoch() -> None:
    named = {*rows.FORM_FIELDS, *rows.PLAIN_FIELDS}
    placed = {"number", "day", "time_ms", "latitude_e8min", "longitude_e8min"}
    assert {item.name for item in dataclasses.fields(Epoch)} == named | placed


def test_forms_are_shared_by_two_connections(tmp_path: Path) -> None:
    """A rebuild by another process between two bursts must not mix up the forms."""
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        small.record(book, 1, 1, 10)
        with Book.open(path, clock=small.clock(), write=True) as other:
            changed = [dataclasses.replace(small.epoch(number), station=str(number)) for number in range(1, 11)]
            other.replace_epochs(1, changed)
        small.record(book, 1, 11, 20)
        assert book.epochs(1) == changed + [small.epoch(number) for number in range(11, 21)]


def test_an_epoch_takes_at_most_60_bytes(tmp_path: Path) -> None:
    """The goal is 1.5 x gzip -9 of the raw log in all; with arrival times a row may take a little more."""
    path = tmp_path / "a.book"
    epochs = [
        dataclasses.replace(
            small.epoch(number),
            received_monotonic_ms=None,
            received_utc_ms=None,
            pdop_milli=1100,
            vdop_milli=900,
            sigma_longitude_e5m=700,
            sigma_altitude_e5m=1500,
        )
        for number in range(1, 5001)
    ]
    with small.begun(path) as book:
        before = path.stat().st_size
        book.write_burst(1, [], epochs)
        book._connection.execute("VACUUM")
    assert (path.stat().st_size - before) / len(epochs) < 60
