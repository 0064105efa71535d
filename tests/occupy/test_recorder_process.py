"""The recorder as a process, over a pseudo-terminal at 10 Hz: killed, unplugged, hung up on, told to stop.

Every wait is on a condition. What is promised: nothing committed is lost, an outage is an entry, and what was decoded
live is what a decoder makes of the recorded items afterwards.
"""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import threading
import time
from typing import Any

import pytest

from fieldbook.book.lock import held
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.model.item import ItemKind
from fieldbook.occupy.detached import REAPER, recorder_alive, start_recorder
from fieldbook.occupy.ending import request_end, request_leave
from fieldbook.occupy.rebuild import compare

from .conftest import Port, Recorders, until

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="not run: pseudo-terminals missing")


def identical(recorders: Recorders, occupation: int = 1) -> None:
    with recorders.opened() as book:
        assert compare(book, occupation) == []


def test_kill_9_loses_nothing_committed_and_the_same_observe_resumes(recorders: Recorders, port: Port) -> None:
    first = recorders.observe(link=port.link)
    until(lambda: recorders.epochs() >= 10)
    with recorders.opened() as book:
        before = b"".join(book.received(1))
    os.kill(first.pid, signal.SIGKILL)
    first.wait()
    assert not held(recorders.book), "the lock goes with the process"
    with recorders.opened() as book:
        after = b"".join(book.received(1))
        assert after.startswith(before)
        assert book.state().occupations[1].open
        count = len(book.epochs(1))
    recorders.observe(link=port.link)
    until(lambda: recorders.epochs() >= count + 10)
    assert list(recorders.entries("occupation")) == recorders.entries("occupation")[:1], "one occupation, not two"
    assert recorders.entries("resumed")[0]["after_s"] >= 0
    assert recorders.entries("gap")[0]["reason"] == "recorder stopped"
    request_end(recorders.book, 1, "R. Kell", wait_s=20)
    with recorders.opened() as book:
        kinds = [item.kind for item in book.items(1)]
        assert b"".join(book.received(1)).startswith(after)
    assert kinds[0] is ItemKind.OPENED
    assert ItemKind.STARTED in kinds
    assert kinds[-1] is ItemKind.END
    identical(recorders)


def test_unplugging_leaves_a_gap_entry_and_a_continued_occupation(recorders: Recorders, port: Port) -> None:
    recorders.observe(link=port.link)
    until(lambda: recorders.epochs() >= 5)
    port.unplug()
    with recorders.opened() as book:
        until(lambda: (state := book.recorder_state()) is not None and state.link_state == "lost")
        count = len(book.epochs(1))
    port.plug_in()
    until(lambda: recorders.epochs() >= count + 5)
    gap = recorders.entries("gap")[0]
    assert gap["from_utc"] < gap["to_utc"]
    assert float(gap["seconds"]) > 0
    assert len(recorders.entries("occupation")) == 1
    with recorders.opened() as book:
        kinds = [item.kind for item in book.items(1) if item.kind is not ItemKind.BYTES]
    assert kinds[:3] == [ItemKind.OPENED, ItemKind.LOST, ItemKind.REOPENED]
    identical(recorders)


def test_hanging_up_the_terminal_does_not_touch_the_recorder(recorders: Recorders, port: Port) -> None:
    process = recorders.observe(link=port.link)
    until(lambda: recorders.epochs() >= 3)
    process.send_signal(signal.SIGHUP)
    count = recorders.epochs()
    until(lambda: recorders.epochs() >= count + 5)
    assert process.poll() is None


@pytest.mark.parametrize("name", ["SIGTERM", "SIGINT"])
def test_being_told_to_stop_leaves_the_occupation_open(recorders: Recorders, port: Port, name: str) -> None:
    process = recorders.observe(link=port.link)
    until(lambda: recorders.epochs() >= 3)
    process.send_signal(getattr(signal, name))
    code, out, err = recorders.finished(process)
    assert code == 130
    result = json.loads(out)
    assert (result["ended_by"], result["open"]) == (None, True)
    assert "Traceback" not in err
    assert [body["state"] for body in recorders.entries("recorder")] == ["running", "closed"]
    assert not recorders.book.with_name("job.book-wal").exists(), "closed cleanly: one plain file"
    with recorders.opened() as book:
        assert list(book.items(1))[-1].kind is ItemKind.BYTES
    identical(recorders)


def test_a_second_recorder_is_refused(recorders: Recorders, port: Port) -> None:
    recorders.observe(link=port.link)
    code, out, _ = recorders.finished(recorders.observe(link=port.link, wait=False))
    assert code == 4
    assert json.loads(out)["error"]["code"] == "locked"


def test_for_ends_the_occupation(recorders: Recorders, port: Port) -> None:
    code, out, _ = recorders.finished(recorders.observe("--for", "1s", link=port.link))
    result = json.loads(out)
    assert code == 0
    assert result["ended_by"] == "time limit"
    assert result["epochs"]["heard"] >= 5
    end = recorders.entries("end")[0]
    assert (end["by"], end["epochs"]) == ("time limit", result["epochs"]["heard"])
    with recorders.opened() as book:
        assert book.received_digest(1)[1] == end["received_sha256"]
    identical(recorders)


def test_observe_end_ends_it_through_the_running_recorder(recorders: Recorders, port: Port) -> None:
    running = recorders.observe(link=port.link)
    until(lambda: recorders.epochs() >= 3)
    code, out, _ = recorders.finished(recorders.observe("--end", wait=False))
    assert code == 0
    assert json.loads(out)["ended_by"] == "operator"
    code, out, _ = recorders.finished(running)
    assert (code, json.loads(out)["ended_by"]) == (0, "operator")
    code, out, _ = recorders.finished(recorders.observe("--end", wait=False))
    assert (code, json.loads(out)["error"]["code"]) == (2, "none_open")


def test_another_mark_or_set_up_is_refused_and_new_begins_another(recorders: Recorders, port: Port, session) -> None:
    process = recorders.observe(link=port.link)
    until(lambda: recorders.epochs() >= 3)
    process.send_signal(signal.SIGTERM)
    recorders.finished(process)
    text = session.read_text()
    session.write_text(text.replace('name = "KR-07"', 'name = "KR-08"'))
    code, out, _ = recorders.finished(recorders.observe(link=port.link, wait=False))
    assert (code, json.loads(out)["error"]["code"]) == (2, "other_occupation_open")
    session.write_text(text.replace('centring = "optical plummet"', 'centring = "laser plummet"'))
    code, out, _ = recorders.finished(recorders.observe(link=port.link, wait=False))
    assert code == 2
    assert "setup.centring" in json.loads(out)["error"]["text"]
    code, out, _ = recorders.finished(recorders.observe("--new", "--for", "1s", link=port.link, wait=False))
    assert (code, json.loads(out)["occupation"]) == (0, 2)
    assert [body["by"] for body in recorders.entries("end")] == ["new occupation", "time limit"]
    identical(recorders, 1)
    identical(recorders, 2)


def begun(recorders: Recorders, port: Port, session) -> Book:
    """A book with an occupation that nobody records yet, as the screen leaves it before it starts a recorder."""
    from fieldbook.occupy.begin import begin_occupation
    from fieldbook.settings.session import load_session

    book = Book.create(recorders.book, clock=SystemClock(), observer="R. Kell")
    assert begin_occupation(book, load_session(session), port.link) == (1, False)
    return book


def test_the_detached_recorder_outlives_its_starter(recorders: Recorders, port: Port, session) -> None:
    begun(recorders, port, session).close()
    script = (
        "from pathlib import Path; from fieldbook.occupy.detached import start_recorder; "
        f"start_recorder(Path({str(recorders.book)!r}), 1)"
    )
    subprocess.run([sys.executable, "-c", script], check=True, timeout=60)
    assert recorder_alive(recorders.book)
    count = recorders.epochs()
    until(lambda: recorders.epochs() >= count + 3)
    request_leave(recorders.book, 1, "R. Kell")
    until(lambda: not recorder_alive(recorders.book))
    with recorders.opened() as book:
        assert book.state().occupations[1].open
    start_recorder(recorders.book, 1)
    until(lambda: recorders.epochs() >= count + 6)
    request_end(recorders.book, 1, "R. Kell", wait_s=20)
    until(lambda: not recorder_alive(recorders.book) and reaped())
    identical(recorders)


def reaped() -> bool:
    return all(thread.name != REAPER for thread in threading.enumerate())


def test_the_detached_recorder_reports_why_it_does_not_start(recorders: Recorders, port: Port, session) -> None:
    from fieldbook.errors import BookError, LinkError, UsageError

    begun(recorders, port, session).close()
    port.unplug()
    with pytest.raises(LinkError):
        start_recorder(recorders.book, 1)
    with pytest.raises(UsageError, match="no occupation 7"):
        start_recorder(recorders.book, 7)
    port.plug_in()
    start_recorder(recorders.book, 1)
    with pytest.raises(BookError) as refused:
        start_recorder(recorders.book, 1)
    assert refused.value.code == "locked"
    request_end(recorders.book, 1, "R. Kell", wait_s=20)
    until(lambda: not recorder_alive(recorders.book) and reaped())


def test_ending_without_a_recorder_does_what_it_would_have_done(recorders: Recorders, port: Port) -> None:
    process = recorders.observe(link=port.link)
    until(lambda: recorders.epochs() >= 5)
    os.kill(process.pid, signal.SIGKILL)
    process.wait()
    request_end(recorders.book, 1, "R. Kell", wait_s=5)
    with recorders.opened() as book:
        state = book.state().occupations[1]
        assert (state.ended_by, state.received_sha256) == ("operator", book.received_digest(1)[1])
        assert recorders.entries("end")[0]["epochs"] == len(book.epochs(1))
    identical(recorders)


def test_status_and_watch_tell_of_a_running_recorder(recorders: Recorders, port: Port) -> None:
    recorders.observe(link=port.link)
    until(lambda: recorders.epochs() >= 3)
    command = [sys.executable, "-m", "fieldbook"]

    def status() -> dict[str, Any]:
        asked = [*command, "status", str(recorders.book), "--json"]
        done = subprocess.run(asked, check=True, capture_output=True, text=True)
        tree: dict[str, Any] = json.loads(done.stdout)
        return tree

    told = until(lambda: (tree := status())["recorder"].get("epochs") and tree)
    assert told["schema"] == "fieldbook.status/1"
    assert told["recorder"]["alive"]
    assert told["recorder"]["link_state"] == "open"
    assert told["recorder"]["quality_words"] == "RTK fixed"
    assert told["recorder"]["silence_s"] < 5
    watch = subprocess.Popen(
        [*command, "watch", str(recorders.book)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    assert watch.stdout is not None
    assert "RTK fixed" in watch.stdout.readline()
    watch.send_signal(signal.SIGINT)
    _, err = watch.communicate(timeout=60)
    assert watch.returncode == 130
    assert "Traceback" not in err


def test_a_port_that_cannot_be_opened_leaves_no_book(recorders: Recorders) -> None:
    began = time.monotonic()
    code, out, _ = recorders.finished(recorders.observe(link="serial:///dev/none?baud=9600", wait=False))
    assert code == 3
    assert json.loads(out)["error"]["remedy"]
    assert not recorders.book.exists()
    assert time.monotonic() - began < 10
