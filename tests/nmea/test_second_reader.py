"""Against an independent library: pynmea2 1.19, exact equality of every position on valid streams."""

from __future__ import annotations

import random
from pathlib import Path

import pynmea2
import pytest

from fieldbook.nmea.describe import describe, field_names, sentence_name
from fieldbook.nmea.fields import read_time
from fieldbook.nmea.second_reader import second_readings

from .cases import CASES
from .examples import EXAMPLES
from .feeding import byte_by_byte, decoded, gga, random_pieces, rmc, sentence

PUBLISHED = Path(__file__).parents[1] / "published" / "data" / "nmea_examples.txt"


def made_up(count: int) -> bytes:
    chance = random.Random(31)
    out = []
    for n in range(count):
        decimals = chance.randint(4, 9)
        north = f"{chance.randrange(90):02d}{chance.randrange(60):02d}.{chance.randrange(10**decimals):0{decimals}d}"
        east = f"{chance.randrange(180):03d}{chance.randrange(60):02d}.{chance.randrange(10**decimals):0{decimals}d}"
        height = f"{chance.uniform(-400, 9000):.{chance.randint(0, 6)}f}"
        clock = f"{n // 3600:02d}{n // 60 % 60:02d}{n % 60:02d}.00"
        place = f"{north},{chance.choice('NS')},{east},{chance.choice('EW')}"
        if n % 3:
            unit = chance.choice("MMMf")
            out.append(sentence(f"GNGGA,{clock},{place},{n % 6},12,0.7,{height},{unit},-12.345,M,1.0,0061"))
        else:
            out.append(
                sentence(
                    f"GNGNS,{clock},{place},{chance.choice(['RFNN', 'AAN', 'NNNN'])},12,0.7,{height},-12.3,1.0,0061,V"
                )
            )
    return b"".join(out)


def test_every_position_is_the_same_through_pynmea2() -> None:
    data = made_up(600)
    epochs, _ = decoded(data)
    readings = list(second_readings(random_pieces(5)(data)))
    assert len(epochs) == len(readings) == 600
    for epoch, reading in zip(epochs, readings, strict=True):
        assert (epoch.source, epoch.talker) == (reading.source, reading.talker)
        assert epoch.time_ms == read_time(reading.time_text)
        assert (epoch.latitude_e8min, epoch.longitude_e8min) == (reading.latitude_e8min, reading.longitude_e8min)
        assert (epoch.altitude_e5m, epoch.separation_e5m) == (reading.altitude_e5m, reading.separation_e5m)
        assert epoch.quality == reading.quality


def test_degrees_agree_with_pynmea2s_own_to_its_float() -> None:
    for line in made_up(60).decode().splitlines():
        message = pynmea2.parse(line, check=True)
        epoch = decoded(line.encode() + b"\r\n")[0][0]
        assert epoch.latitude_e8min is not None
        assert epoch.latitude_e8min / 60e8 == pytest.approx(message.latitude, abs=1e-10)


def test_the_examples_used_epochs_have_a_second_reading() -> None:
    for case in CASES:
        data = EXAMPLES[case.rule][1]
        used = [one for one in decoded(data)[0] if one.code is None and one.source == "GGA"]
        readings = {(one.latitude_e8min, one.longitude_e8min) for one in second_readings(byte_by_byte(data))}
        assert {(one.latitude_e8min, one.longitude_e8min) for one in used} <= readings, case.rule


def test_published_teaching_examples() -> None:
    """Long-published teaching sentences, their figures known: 48.1173 N, 11.5167 E, 545.4 m, separation 46.9 m."""
    lines = [line for line in PUBLISHED.read_text().splitlines() if line.startswith("$")]
    epochs, decoder = decoded("\r\n".join(lines).encode())
    assert decoder.counters["good"] == len(lines)
    first = epochs[0]
    assert first.latitude_e8min == (48 * 60 * 1000 + 7_038) * 10**5  # 48 deg 07.038 min
    assert first.longitude_e8min == (11 * 60 + 31) * 10**8
    assert first.height_e5m == 59_230_000


def test_what_a_link_sends_in_words() -> None:
    data = (
        b"".join(gga(f"10000{n}.00") for n in range(4)) + rmc("100000.00", "040531") + gga("100009.00")[:30] + b"\r\n"
    )
    rows = describe(data, 2.0)
    assert [(row.sentence, row.count, row.rate_hz) for row in rows] == [("GNGGA", 4, 2.0), ("GNRMC", 1, 0.5)]
    assert rows[0].example == gga("100000.00").decode().strip()
    assert sentence_name("GNZDA") == "Time and date"
    assert sentence_name("XXQQQ") == "not known by name"
    assert len(field_names("GNGGA")) == 14
    assert describe(b"", 0) == []
