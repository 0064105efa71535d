"""Every target with fixed seeds for a moment: the same inputs on every run."""

from __future__ import annotations

import random
import tracemalloc
from time import perf_counter

import pytest

from fieldbook.model.item import Item, ItemKind
from fieldbook.nmea import framing
from fieldbook.nmea.decoder import Decoder, DecoderOptions
from fieldbook.nmea.framing import Framer

from .mutations import mutate
from .target import CORPUS
from .targets import TARGETS


@pytest.mark.parametrize("name", TARGETS)
def test_target(name: str) -> None:
    target = TARGETS[name]
    seeds = target.seeds()
    for data in seeds:
        target.run(data)
    chance = random.Random(f"smoke {name}")
    for _ in range(target.smoke):
        data = mutate(chance.choice(seeds), chance, target.words, seeds, min(700, target.most_bytes))
        try:
            target.run(data)
        except Exception as error:
            raise AssertionError(f"{name}: {error!r} on {data!r}") from error


def test_the_corpus_is_small_and_belongs_to_targets() -> None:
    files = [path for path in CORPUS.rglob("*") if path.is_file()]
    assert {path.parent.name for path in files} <= set(TARGETS)
    assert sum(path.stat().st_size for path in files) < 200_000


def _noise(kind: str, size: int) -> list[bytes]:
    chance = random.Random(f"noise {kind}")
    pieces = []
    for _ in range(size // 8192):
        if kind == "bytes":
            pieces.append(chance.randbytes(8192))
        elif kind == "printable":  # dollars, stars, commas and digits: frames begin and break all the time
            pieces.append(bytes(chance.choices(b"$!*\\,.0123456789ABCDEFGNPRS\r\n ", k=8192)))
        else:  # one sound sentence over and over, its time standing still: nothing may pile up
            line = b"$GNGGA,011000.00,3416.45886159,S,14603.11111128,E,5,21,0.64,220.0479,M,13.482,M,1.0,0042*45\r\n"
            pieces.append((line * 100)[:8192])
    return pieces


@pytest.mark.slow
@pytest.mark.parametrize("kind", ["bytes", "printable", "standing"])
def test_ten_megabytes_of_noise_in_bounded_memory_and_linear_time(kind: str) -> None:
    """10 MB: every byte accounted for, less than 4 MB held at any moment, the second half about as fast as the first."""
    pieces = _noise(kind, 10 * 1024 * 1024)
    decoder = Decoder(DecoderOptions(accept_without_checksum=True))
    half = len(pieces) // 2
    times = []
    for part in (pieces[:half], pieces[half:]):
        start = perf_counter()
        for piece in part:
            decoder.feed(Item(ItemKind.BYTES, piece))
        times.append(perf_counter() - start)
    assert times[1] < 3 * times[0] + 0.5  # linear; generous, for a busy machine
    tracemalloc.start()
    try:
        for piece in pieces[: half // 8]:
            decoder.feed(Item(ItemKind.BYTES, piece))
        early = tracemalloc.get_traced_memory()[0]
        tracemalloc.reset_peak()
        for piece in pieces[half // 8 : half // 2]:
            decoder.feed(Item(ItemKind.BYTES, piece))
        late, peak = tracemalloc.get_traced_memory()
    finally:
        tracemalloc.stop()
    assert late - early < 256 * 1024
    assert peak < 4 * 1024 * 1024
    decoder.finish()
    counters = decoder.counters
    parts = ("good_bytes", "damaged_bytes", "junk_bytes", "tag_bytes", "line_end_bytes", "pending_bytes")
    assert counters["received_bytes"] == sum(counters[part] for part in parts)
    assert counters["received_bytes"] == sum(map(len, pieces)) + sum(map(len, pieces[: half // 2]))


def _fails(name: str, times: int = 400) -> bool:
    target = TARGETS[name]
    seeds = target.seeds()
    chance = random.Random(name)
    inputs = [*seeds, *(mutate(chance.choice(seeds), chance, target.words, seeds, 700) for _ in range(times))]
    for data in inputs:
        try:
            target.run(data)
        except Exception:
            return True
    return False


def test_targets_notice_planted_faults(monkeypatch: pytest.MonkeyPatch) -> None:
    """A target that cannot fail would be worth nothing."""
    with monkeypatch.context() as planted:  # a line end too few
        planted.setattr(Framer, "_outside", lambda self, junk: setattr(self, "junk_bytes", self.junk_bytes + 1))
        assert _fails("framer")
        assert _fails("decoder")
    with monkeypatch.context() as planted:
        planted.setattr(framing, "_LONGEST_TEXT", 200)  # a limit that holds in one of two places
        assert _fails("framer")
    with monkeypatch.context() as planted:
        planted.setattr("fieldbook.settings.session.MAX_BYTES", 10)
        assert not _fails("session_file", 20)  # a refusal is no fault
    with monkeypatch.context() as planted:
        planted.setattr("fieldbook.settings.session._conditions", lambda tree, where: tree["no such"])
        assert _fails("session_file", 20)
    with monkeypatch.context() as planted:
        planted.setattr("fieldbook.book.audit.audit_raw", lambda audit: None)  # an audit that looks away
        assert _fails("book_values", 300)
    with monkeypatch.context() as planted:
        planted.setattr("fieldbook.links.file._DAMAGE", (OSError,))
        assert _fails("packed_log")
