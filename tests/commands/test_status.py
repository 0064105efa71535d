"""`status` and `watch` where no recorder runs; with one they are tested beside the recorder."""

from __future__ import annotations

from functools import reduce

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.model.recorder import RecorderState
from fieldbook.settings.session import load_session


def sentence(body: str) -> bytes:
    return f"${body}*{reduce(lambda total, char: total ^ ord(char), body, 0):02X}\r\n".encode()


def test_a_book_without_an_occupation(book, fieldbook) -> None:
    tree = fieldbook("status", book, "--json").json
    assert (tree["schema"], tree["occupation"], tree["recorder"]) == ("fieldbook.status/1", None, {"alive": False})
    assert "no occupation yet" in fieldbook("status", book).out
    assert "no occupation yet" in fieldbook("watch", book, "--count", 1).out


def test_a_recorder_that_is_gone_is_said(book, session, fieldbook) -> None:
    tree = load_session(session).tree
    with Book.open(book, clock=SystemClock(), write=True) as opened:
        body = {"occupation": 1, "mark": "KR-07", "session": tree, "link": "tcp://h.invalid:1", "simulated": False}
        opened.append("occupation", body, "R. Kell")
        opened.write_burst(1, [], [], RecorderState(occupation=1, mark="KR-07", link_state="open"))
    assert "RECORDER GONE" in fieldbook("status", book).out
    told = fieldbook("status", book, "--json").json
    assert told["recorder"]["alive"] is False
    assert told["figures"] is None
    assert told["problem"]["remedy"]


def test_an_ended_occupation_shows_its_figures(tmp_path, session, fieldbook) -> None:
    said = []
    for second in range(3600, 4000):
        time = f"{second // 3600:02d}{second // 60 % 60:02d}{second % 60:02d}.00"
        place = f"2340.{1234567 + second % 11:07d},S,14853.{1234567 - second % 7:07d},E"
        said.append(sentence(f"GNGGA,{time},{place},4,20,0.7,123.{450 + second % 13},M,-12.345,M,1.0,0061"))
        said.append(sentence(f"GNRMC,{time},A,{place},0.004,,040327,,,R,V"))
    (tmp_path / "receiver.nmea").write_bytes(b"".join(said))
    path = tmp_path / "job.book"
    assert fieldbook("observe", path, "--session", session).code == 0
    figures = fieldbook("status", path, "--json").json["figures"]
    assert figures["kept"] == 400
    assert 0.001 < figures["horizontal95_m"] < 0.1
    assert figures["verdict"] in ("not yet", "good to leave", "cannot reach")
    assert any(item["line"] == "initialisations" for item in figures["open_lines"])
    text = fieldbook("status", path).out
    assert "ended by end of file" in text
    assert "95 %: 0.0" in text
    assert "worth about" in fieldbook("watch", path, "--count", 1).out


def test_missing_and_wrong_files(tmp_path, fieldbook) -> None:
    assert fieldbook("status", tmp_path / "none.book").code == 2
    assert fieldbook("watch", tmp_path / "none.book").code == 2
    (tmp_path / "x.book").write_text("notes")
    assert fieldbook("status", tmp_path / "x.book").code == 4
