"""An invented receiver log for the benchmarks: multi-constellation sentences of one epoch a second, seeded.

Written here without the package's simulator, so that a benchmark does not measure what it was made for.
"""

from __future__ import annotations

import random
from functools import reduce


def sentence(body: str) -> bytes:
    """A sentence with its checksum (NMEA 0183: XOR of everything between `$` and `*`) and CR LF."""
    checksum = reduce(lambda total, char: total ^ ord(char), body, 0)
    return f"${body}*{checksum:02X}\r\n".encode("ascii")


def burst(second: float, rng: random.Random, *, sky: bool = True) -> bytes:
    """Everything a receiver says at one epoch: GGA, RMC, GST, VTG, and with `sky` also GSA and GSV."""
    whole = int(second)
    time = f"{whole // 3600 % 24:02d}{whole // 60 % 60:02d}{second % 60:05.2f}"
    day = f"{4 + whole // 86400:02d}0327"
    north, east, up = rng.gauss(0, 400), rng.gauss(0, 400), rng.gauss(0, 0.012)
    latitude = f"12{(345678901 + round(north)) / 1e7:010.7f}"
    longitude = f"02345.{6789012 + round(east):07d}"
    place = f"{latitude},S,{longitude},W"
    hdop = f"{0.7 + rng.random() / 5:.1f}"
    said = [
        f"GNGGA,{time},{place},4,{rng.randint(17, 23)},{hdop},{123.456 + up:.3f},M,-12.345,M,"
        f"{rng.randint(1, 2)}.0,0061",
        f"GNRMC,{time},A,{place},{rng.random() / 50:.3f},,{day},,,R,V",
        f"GNGST,{time},{0.8 + rng.random() / 10:.2f},0.011,0.009,{rng.randint(0, 179)}.0,0.009,0.010,0.019",
        f"GNVTG,,T,,M,{rng.random() / 50:.3f},N,{rng.random() / 30:.3f},K,R",
    ]
    if sky:
        said += _sky(rng)
    return b"".join(sentence(body) for body in said)


def _sky(rng: random.Random) -> list[str]:
    said = []
    for number, (talker, first) in enumerate((("GP", 1), ("GL", 65), ("GA", 1), ("GB", 19)), start=1):
        used = [f"{first + 3 * slot:02d}" for slot in range(6)]
        said.append(f"GNGSA,A,3,{','.join(used)},,,,,,,1.3,0.7,1.1,{number}")
        for message in range(2):
            parts = [
                f"{first + 3 * slot:02d},{20 + 7 * slot:02d},{40 * slot + number:03d},{38 + rng.randint(0, 9):02d}"
                for slot in range(4 * message, 4 * message + 4)
            ]
            said.append(f"{talker}GSV,2,{message + 1},08,{','.join(parts)},1")
    return said


def log(epochs: int, *, step_s: float = 1.0, sky: bool = True, seed: int = 7, start_s: float = 3600.0) -> bytes:
    """A whole log."""
    rng = random.Random(seed)
    return b"".join(burst(start_s + index * step_s, rng, sky=sky) for index in range(epochs))
