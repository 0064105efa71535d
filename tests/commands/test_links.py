"""`links`: nothing is opened to list ports; one named link is listened to."""

from __future__ import annotations

import os
import sys
import threading
import time

import pytest

from fieldbook.commands import links

GGA = b"$GNGGA,100000.00,1234.5678901,S,02345.6789012,W,4,12,0.7,123.456,M,-12.345,M,1.0,0061*7D\r\n"


def test_listing_opens_no_port(fieldbook, monkeypatch) -> None:
    import serial

    monkeypatch.setattr(serial.Serial, "open", lambda *_: pytest.fail("a port was opened"))
    said = fieldbook("links", "--json")
    assert said.code == 0
    assert said.json["schema"] == "fieldbook.links/1"
    assert isinstance(said.json["ports"], list)
    assert fieldbook("links").code == 0


def test_listening_to_a_file_counts_and_names_sentences(fieldbook, tmp_path) -> None:
    path = tmp_path / "r.nmea"
    path.write_bytes(GGA * 3 + b"$GNXYZ,1*00\r\n")
    said = fieldbook("links", "--listen", f"file:{path}", "--json")
    assert said.code == 0
    row = said.json["sentences"][0]
    assert (row["sentence"], row["count"], row["title"], row["used"]) == ("GNGGA", 3, "fix data", True)
    assert row["fields"][:2] == ["Timestamp", "Latitude"], "as pynmea2 names them"
    assert "GNGGA" in fieldbook("links", "--listen", f"file:{path}").out


def test_what_is_no_nmea_is_said(fieldbook, tmp_path) -> None:
    path = tmp_path / "r.bin"
    path.write_bytes(b"\x00\x01\x02" * 500)
    said = fieldbook("links", "--listen", f"file:{path}")
    assert said.code == 0
    assert "wrong speed" in said.out


@pytest.mark.parametrize(("link", "code"), [("nothing", 2), ("file:none.nmea", 3), ("tcp://127.0.0.1:1", 3)])
def test_links_that_cannot_be_opened(fieldbook, tmp_path, monkeypatch, link, code) -> None:
    monkeypatch.chdir(tmp_path)
    said = fieldbook("links", "--listen", link, "--json")
    assert said.code == code
    assert said.json["error"]["remedy"]


@pytest.mark.skipif(sys.platform == "win32", reason="not run: pseudo-terminals missing")
def test_listening_to_a_port_gives_rates(fieldbook, monkeypatch) -> None:
    import tty

    monkeypatch.setattr(links.listen, "__defaults__", (0.5,))
    ours, theirs = os.openpty()
    tty.setraw(theirs)
    halt = threading.Event()

    def send() -> None:
        while not halt.wait(0.05):
            os.write(ours, GGA)

    sender = threading.Thread(target=send)
    sender.start()
    began = time.monotonic()
    try:
        said = fieldbook("links", "--listen", f"serial://{os.ttyname(theirs)}?baud=9600", "--json")
    finally:
        halt.set()
        sender.join()
        os.close(ours)
        os.close(theirs)
    assert said.code == 0
    assert 5 < said.json["sentences"][0]["rate_hz"] < 40
    assert time.monotonic() - began < 5


@pytest.mark.skipif(sys.platform == "win32", reason="not run: pseudo-terminals missing")
def test_a_silent_port_is_exit_3(fieldbook, monkeypatch) -> None:
    monkeypatch.setattr(links.listen, "__defaults__", (0.3,))
    ours, theirs = os.openpty()
    try:
        said = fieldbook("links", "--listen", f"serial://{os.ttyname(theirs)}?baud=9600", "--json")
    finally:
        os.close(ours)
        os.close(theirs)
    assert (said.code, said.json["error"]["code"]) == (3, "silent")
