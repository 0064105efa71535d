"""Link addresses: the forms of the contract, their canonical text, and what each wrong one is told."""

from __future__ import annotations

from pathlib import Path

import pytest

from fieldbook.errors import ExitCode, UsageError
from fieldbook.links import parse_link

GOOD = [
    (
        "serial:///dev/ttyUSB0?baud=115200",
        "serial:///dev/ttyUSB0?baud=115200",
        {"device": "/dev/ttyUSB0", "baud": 115200},
    ),
    ("serial:/dev/ttyS0?baud=9601", "serial:///dev/ttyS0?baud=9601", {"device": "/dev/ttyS0", "baud": 9601}),
    ("serial:COM5?baud=115200", "serial:COM5?baud=115200", {"device": "COM5", "data": "8N1"}),
    ("serial:COM5?data=7e1&baud=4800", "serial:COM5?baud=4800&data=7E1", {"data": "7E1", "baud": 4800}),
    ("serial:COM5?baud=4800&data=8N1", "serial:COM5?baud=4800", {"data": "8N1"}),
    ("SERIAL:COM5?baud=1234567", "serial:COM5?baud=1234567", {"baud": 1234567}),
    ("tcp://10.0.0.5:9001", "tcp://10.0.0.5:9001", {"host": "10.0.0.5", "port": 9001}),
    ("tcp://rover.example:9001", "tcp://rover.example:9001", {"host": "rover.example"}),
    ("tcp://[2001:db8::5]:9001", "tcp://[2001:db8::5]:9001", {"host": "2001:db8::5", "port": 9001}),
    ("udp://0.0.0.0:9100", "udp://0.0.0.0:9100", {"port": 9100, "sender": None}),
    ("udp://0.0.0.0:9100?from=10.0.0.7", "udp://0.0.0.0:9100?from=10.0.0.7", {"sender": "10.0.0.7"}),
    (
        "udp://[::]:9100?from=[2001:db8::7]",
        "udp://[::]:9100?from=[2001:db8::7]",
        {"host": "::", "sender": "2001:db8::7"},
    ),
    ("sim:rtk?seed=7", "sim:rtk?seed=7", {"scenario": "rtk", "seed": 7, "rate_hz": None, "speed": 1.0}),
    ("sim:rtk", "sim:rtk?seed=1", {"seed": 1}),
    ("sim:rtk-10hz?speed=20&rate=5", "sim:rtk-10hz?seed=1&rate=5&speed=20", {"rate_hz": 5.0, "speed": 20.0}),
]


@pytest.mark.parametrize(("text", "canonical", "fields"), GOOD, ids=[row[0] for row in GOOD])
def test_forms(text: str, canonical: str, fields: dict[str, object]) -> None:
    address = parse_link(text)
    assert address.text == canonical
    assert address.live
    assert {key: getattr(address, key) for key in fields} == fields
    assert parse_link(canonical) == address  # canonical text reads back as the same address


@pytest.mark.parametrize(
    ("text", "path"),
    [
        ("file:receiver.nmea", "/jobs/kestrel/receiver.nmea"),
        ("file:../raw/day one.nmea.gz", "/jobs/raw/day one.nmea.gz"),
        ("file:/var/log/a.nmea", "/var/log/a.nmea"),
        ("file:///var/log/a.nmea", "/var/log/a.nmea"),
        ("file:what?seed=7&x", "/jobs/kestrel/what?seed=7&x"),  # all after the colon is the path
        ("file:C:odd", "/jobs/kestrel/C:odd"),
    ],
)
def test_file_is_relative_to_the_session_file_and_everything_after_the_colon_is_the_path(text: str, path: str) -> None:
    address = parse_link(text, Path("/jobs/kestrel"))
    assert (address.kind, str(address.path), address.text, address.live) == ("file", path, f"file:{path}", False)
    assert parse_link(address.text, Path("/elsewhere")) == address


def test_file_without_a_session_file_is_relative_to_the_current_folder(tmp_path, monkeypatch) -> None:
    monkeypatch.chdir(tmp_path)
    assert parse_link("file:a.nmea").path == tmp_path / "a.nmea"


BAD = [
    ("", "is no link address", "Forms:"),
    ("receiver.nmea", "kind of link is missing", "file:receiver.nmea"),
    ("C:\\log.nmea", "kind of link is missing", "file:C:\\log.nmea"),
    ("seriell:COM5?baud=1", "is no link address", "Did you mean 'serial:'?"),
    ("http://host:80", "is no link address", "Forms:"),
    ("serial:COM5", "states no speed", "baud=115200"),
    ("serial:?baud=9600", "names no port", "fieldbook links"),
    ("serial:COM5?baud=fast", "baud 'fast' is not a whole number", "Correct"),
    ("serial:COM5?baud=0", "baud '0' is not a whole number from 1", "Correct"),
    ("serial:COM5?baud=-1", "baud '-1' is not a whole number", "Correct"),
    ("serial:COM5?baud=9600&data=9X3", "is no character format", "8N1"),
    ("serial:COM5?buad=9600", "'buad' is no option of a serial link", "Did you mean 'baud'?"),
    ("serial:COM5?baud=9600&baud=4800", "given twice", "Keep one"),
    ("serial:COM5?baud=", "has no value", "baud=VALUE"),
    ("tcp://host", "names no host and port", "tcp://host:port"),
    ("tcp://:9001", "names no host and port", "tcp://host:port"),
    ("tcp://host:99999", "port '99999' is not a whole number from 1 to 65535", "Correct"),
    ("tcp://2001:db8::5:9001", "IPv6 address stands in brackets", "tcp://[2001:db8::5]:9001"),
    ("tcp://host:9001?baud=9600", "'baud' is no option of a tcp link", "Options: none"),
    ("udp://0.0.0.0:9100?form=a", "'form' is no option of a udp link", "Did you mean 'from'?"),
    ("file:", "names no file", "file:PATH"),
    ("sim:rtx?seed=7", "no simulated receiver 'rtx'", "Did you mean 'sim:rtk'?"),
    ("sim:rtk?seed=x", "seed 'x' is not a whole number", "Correct"),
    ("sim:rtk?rate=3", "do not fall on hundredths", "1, 2, 5, 10"),
    ("sim:rtk?speed=0", "speed '0' is not a number from", "Correct"),
]


@pytest.mark.parametrize(("text", "said", "remedy"), BAD, ids=[row[0] or "nothing" for row in BAD])
def test_a_wrong_address_is_told_what_and_how(text: str, said: str, remedy: str) -> None:
    with pytest.raises(UsageError) as caught:
        parse_link(text)
    assert said in caught.value.text
    assert remedy in caught.value.remedy
    assert caught.value.exit_code == ExitCode.USAGE
