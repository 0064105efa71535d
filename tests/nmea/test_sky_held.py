"""GSV messages looked at many at a time give the same sets and counters as one by one."""

from __future__ import annotations

import random
from collections import defaultdict

import pytest

from fieldbook.nmea.satellites import Sky

_TALKERS = ("GP", "GL", "GA", "GB")


def _messages(chance: random.Random, sound: float) -> list[bytes]:
    out = []
    for _ in range(chance.randrange(400)):
        total = chance.choice((1, 2, 3, 4, 9, 11))
        talker = chance.choice(_TALKERS)
        for number in range(1, total + 1):
            slots = ",".join(f"{chance.randrange(1, 33):02d},{chance.randrange(90)},120,38" for _ in range(4))
            out.append(f"${talker}GSV,{total},{number},{4 * total:02d},{slots},1".encode("ascii"))
    for place in range(len(out)):
        if chance.random() > sound:
            out[place] = chance.choice(
                (out[place][: chance.randrange(7, 14)], b"$GPGSV,,1,", b"$GPGSV,1,1", b"$GPGSV,0,1,00")
            )
    return [text for text in out if chance.random() < 0.5 + sound / 2]


@pytest.mark.parametrize("sound", [1.0, 0.999, 0.98, 0.5])
def test_looked_at_together_is_looked_at_one_by_one(sound: float) -> None:
    chance = random.Random(11)
    for _ in range(25):
        together, single = (Sky(defaultdict(int)) for _ in range(2))
        for text in _messages(chance, sound):
            together.held.append(text)
            single.held.append(text)
            single.settle()
            if chance.random() < 0.01:
                together.settle()
        assert together.satellites() == single.satellites()
        for name in ("_counts", "_cycle", "_total", "_complete"):
            assert getattr(together, name) == getattr(single, name)
