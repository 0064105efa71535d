"""The figure on the screen is the figure of the reduction: on every occupation of the samples, to the last bit, at any moment.

The live side takes the epochs in bursts of uneven length and is looked at in between, as a screen does; the batch side
sees the same epochs at once. Compared is the whole tree of `reduce --json`, leave check and findings included.
"""

from __future__ import annotations

import random
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.model.epoch import Epoch
from fieldbook.model.state import Occupation
from fieldbook.occupy.live import LiveReader
from fieldbook.occupy.reductions import judge, reduce_book
from fieldbook.reduce.occupation import OccupationReducer, Reduced, reduce_occupation


def tree_of(reduced: Reduced, occupation: Occupation) -> dict[str, Any]:
    judge(reduced, occupation, [])
    return reduced.reduction.to_json()


def in_bursts(occupation: Occupation, epochs: Sequence[Epoch], looks: Sequence[int], seed: int) -> dict[int, Any]:
    """The tree after each of the looks (numbers of epochs), one reducer fed in bursts of 1 to 40 epochs."""
    draw, reducer, done, found = random.Random(seed), OccupationReducer(occupation), 0, {}
    for look in looks:
        while done < look:
            end = min(done + draw.randint(1, 40), look)
            reducer.push(list(epochs[done:end]))
            done = end
        found[look] = tree_of(reducer.evaluate(occupation, []), occupation)
    return found


@pytest.mark.parametrize("name", ["kestrel-ridge", "saltpan"])
def test_live_equals_batch_on_every_sample(name: str, sample_books: dict[str, Path]) -> None:
    with Book.open(sample_books[name], clock=SystemClock()) as book:
        for number, occupation in book.state().occupations.items():
            epochs = list(book.epochs(number))
            looks = [len(epochs) * k // 5 for k in (1, 2, 3, 4, 5)]
            live = in_bursts(occupation, epochs, looks, seed=number)
            for look in looks:
                batch = tree_of(reduce_occupation(occupation, epochs[:look], []), occupation)
                assert live[look] == batch, f"occupation {number} after {look} of {len(epochs)} epochs"


@pytest.mark.parametrize("name", ["kestrel-ridge", "saltpan"])
def test_what_the_screen_shows_at_the_end_is_what_is_reduced(name: str, sample_books: dict[str, Path]) -> None:
    with Book.open(sample_books[name], clock=SystemClock()) as book:
        reduced, failed = reduce_book(book)
    assert not failed
    reader = LiveReader(sample_books[name])
    try:
        view = reader.snapshot()
    finally:
        reader.close()
    last = max(reduced, key=lambda item: item.reduction.occupation).reduction
    assert view.reduction is not None
    assert view.reduction.to_json() == last.to_json()


def test_the_running_mean_is_made_only_when_asked_for(sample_books: dict[str, Path]) -> None:
    reader = LiveReader(sample_books["kestrel-ridge"])
    try:
        assert reader.snapshot().convergence is None
        reader.wants_running = True
        made = reader.snapshot().convergence
        assert made is not None
        assert reader.snapshot().convergence is made, "nothing new: not made again"
        view = reader.snapshot()
    finally:
        reader.close()
    assert view.reduction is not None
    assert made.horizontal95_m[-1] == view.reduction.uncertainty.horizontal95_m
    assert made.vertical95_m[-1] == view.reduction.uncertainty.vertical95_m
