"""Mutations of bytes with a seeded random source: the loop without coverage uses nothing else, atheris every second time.

Besides flips, cuts, doublings and splices: numbers are replaced by hostile ones, words of the target are put in, and
the checksums of sentences are mended, because a sentence with a wrong one never gets past the framer.
"""

from __future__ import annotations

import random
import re
from collections.abc import Sequence
from functools import reduce
from operator import xor

_SENTENCE = re.compile(rb"([$!])([^$!*\r\n]{1,250})\*[0-9A-Fa-f]{2}")
_NUMBER = re.compile(rb"[0-9]+(?:\.[0-9]*)?")
NUMBERS = (
    *(
        b"0",
        b"-0",
        b"-1",
        b"00",
        b"1e5",
        b"1E9999999",
        b"nan",
        b"inf",
        b"1_0",
        b"0x10",
        b".",
        b"-",
        b"+1",
        b"1.",
        b".5",
    ),
    *(
        b"999999999",
        b"9999999999",
        b"2147483648",
        b"-9223372036854775808",
        b"9223372036854775807",
        b"18446744073709551616",
    ),
    *(
        b"9" * 30,
        b"9" * 80,
        b"0." + b"9" * 40,
        b"235960.000",
        b"240000",
        b"9000.0000",
        b"18000.00001",
        b"8959.99999999",
    ),
    *("١٢".encode(), b"\xb2", b"290227", b"310279", b"010180"),
)


def mend(data: bytes) -> bytes:
    """The same bytes, with the checksum every sentence ought to have."""
    return _SENTENCE.sub(lambda m: m[1] + m[2] + b"*%02X" % reduce(xor, m[2], 0), data)


def mutate(data: bytes, chance: random.Random, words: Sequence[bytes], others: Sequence[bytes], most: int) -> bytes:
    """One to eight changes."""
    for _ in range(chance.choice((1, 1, 2, 2, 3, 5, 8))):
        data = _once(data, chance, words, others)
    if chance.random() < 0.6:
        data = mend(data)
    return data[:most]


def _once(data: bytes, chance: random.Random, words: Sequence[bytes], others: Sequence[bytes]) -> bytes:
    place = chance.randrange(len(data) + 1)
    end = min(len(data), place + chance.choice((1, 1, 2, 4, 8, 16, 64, 256)))
    match chance.randrange(12):
        case 0:  # one bit
            if place == len(data):
                return data
            return data[:place] + bytes([data[place] ^ 1 << chance.randrange(8)]) + data[place + 1 :]
        case 1:
            return data[:place] + chance.randbytes(end - place) + data[end:]
        case 2:
            return data[:place] + data[end:]
        case 3:
            return data[:place] + data[place:end] * chance.choice((2, 2, 3, 20)) + data[end:]
        case 4:
            return data[:place] + chance.randbytes(chance.choice((1, 2, 4, 8))) + data[place:]
        case 5 | 6 if words:
            return data[:place] + chance.choice(words) + data[chance.choice((place, end)) :]
        case 7 if others:
            other = chance.choice(others)
            start = chance.randrange(len(other) + 1)
            return data[:place] + other[start : start + chance.choice((8, 64, 512, 4096))] + data[place:]
        case 8 | 9:
            found = list(_NUMBER.finditer(data[place : place + 400])) or list(_NUMBER.finditer(data[:400]))
            if not found:
                return data
            one, shift = chance.choice(found), place if _NUMBER.search(data[place : place + 400]) else 0
            return data[: shift + one.start()] + chance.choice(NUMBERS) + data[shift + one.end() :]
        case 10:  # a piece goes somewhere else
            piece, rest = data[place:end], data[:place] + data[end:]
            there = chance.randrange(len(rest) + 1)
            return rest[:there] + piece + rest[there:]
        case _:
            return data[:place] + bytes([chance.choice(b'$!*,\r\n\\\x00\xff"[]{}=&?%/:')]) + data[end:]
