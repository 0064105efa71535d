"""Decoder time against a bare `pynmea2.parse` loop over the same sentences, in one run.

The file is made here: two-system satellites and more, 19 sentences an epoch (GGA, RMC, GST, ZDA, 4 GSA, 10 GSV, VTG).
Run: python -m tests.benchmarks.decoder_speed
"""

from __future__ import annotations

import random
import time
from collections.abc import Callable
from functools import reduce
from operator import xor

EPOCHS = 1500
GOAL = 0.6
_SETS = (("GP", 3, "1"), ("GP", 2, "6"), ("GL", 2, "1"), ("GA", 2, "7"), ("GB", 1, "1"))


def sentence(body: str) -> str:
    """With `$`, checksum and line end."""
    return f"${body}*{reduce(xor, body.encode('ascii'), 0):02X}\r\n"


def stream(epochs: int) -> str:
    """A made-up receiver at 1 Hz in mid-ocean."""
    chance = random.Random(7)
    out: list[str] = []
    for k in range(epochs):
        clock = f"{k // 3600:02d}{k // 60 % 60:02d}{k % 60:02d}.00"
        place = f"1234.{chance.randrange(5678000, 5678999):07d},S,02345.{chance.randrange(6789000, 6789999):07d},W"
        height = f"{123 + chance.random() / 50:.3f}"
        out.append(sentence(f"GNRMC,{clock},A,{place},0.004,,040531,,,R,V"))
        out.append(sentence("GNVTG,,T,,M,0.004,N,0.008,K,D"))
        out.append(sentence(f"GNGGA,{clock},{place},4,22,0.7,{height},M,-12.345,M,1.0,0061"))
        out.extend(sentence(f"GNGSA,A,3,02,05,12,15,24,25,29,31,,,,,1.2,0.7,0.9,{n}") for n in (1, 2, 3, 4))
        for talker, messages, signal in _SETS:
            for n in range(1, messages + 1):
                slots = "02,45,120,38,05,30,210,41,12,67,045,47,15,12,300,33"
                out.append(sentence(f"{talker}GSV,{messages},{n},{4 * messages:02d},{slots},{signal}"))
        out.append(sentence(f"GNGST,{clock},0.85,0.013,0.010,37.0,0.011,0.012,0.025"))
        out.append(sentence(f"GNZDA,{clock},04,05,2031,00,00"))
    return "".join(out)


def best_s(work: Callable[[], object], times: int = 3) -> float:
    """Shortest of several runs."""
    return min(_seconds(work) for _ in range(times))


def _seconds(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def measure(epochs: int = EPOCHS) -> tuple[float, float, int]:
    """(decoder s, bare parse loop s, sentences)."""
    import pynmea2

    from fieldbook.model.item import Item, ItemKind
    from fieldbook.nmea.decoder import Decoder, DecoderOptions

    text = stream(epochs)
    lines = text.splitlines()
    data = text.encode("ascii")
    # a burst a second, as the recorder writes them
    size = len(data) // epochs
    items = [
        Item(ItemKind.BYTES, data[start : start + size], start, 1_935_741_600_000 + start)
        for start in range(0, len(data), size)
    ]

    def decode() -> None:
        decoder = Decoder(DecoderOptions())
        found = [epoch for item in items for epoch in decoder.feed(item)] + decoder.finish()
        assert len(found) == epochs
        assert all(epoch.code is None for epoch in found)

    def parse() -> None:
        for line in lines:
            pynmea2.parse(line)

    return best_s(decode), best_s(parse), len(lines)


def main() -> None:
    """Print the ratio."""
    decoder_s, parse_s, lines = measure()
    print(
        f"decoder {1e6 * decoder_s / lines:.2f} us/sentence, bare pynmea2.parse loop {1e6 * parse_s / lines:.2f}, "
        f"ratio {decoder_s / parse_s:.2f} (goal {GOAL})"
    )


if __name__ == "__main__":
    main()
