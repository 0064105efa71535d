"""Certificates in a real book: its entries accept them, its chain holds, and the state folds them back."""

from __future__ import annotations

from pathlib import Path

import kestrel_ridge as job

from fieldbook.book.store import Book
from fieldbook.certificate.issue import certify
from fieldbook.certificate.verify_file import verify_certificate
from fieldbook.clock import FakeClock, utc_ms_of
from fieldbook.settings.session import load_session

SAMPLE = Path(__file__).parent.parent / "settings" / "contract_sample.toml"


def test_issue_supersede_and_verify(tmp_path: Path) -> None:
    clock = FakeClock(0, utc_ms_of("2027-03-09T14:12:05.000Z"))
    tree = load_session(SAMPLE).tree
    with Book.create(tmp_path / "job.book", clock=clock, observer="R. Kell", session_tree=tree) as book:
        book.append("mark", {"name": "KR-07", "description": "brass plate in rock"}, "R. Kell")
        book.append(
            "occupation",
            {"occupation": 1, "mark": "KR-07", "session": tree, "link": "file:receiver.nmea", "simulated": False},
            "R. Kell",
        )
        after = {"occupation": 1, "method": "slant", "value": "1.5330", "unit": "m", "when": "after"}
        book.append("height", after, "R. Kell")
        book.append(
            "end",
            {"occupation": 1, "by": "end of file", "epochs": 0, "received_bytes": 0, "received_sha256": "0" * 64},
            "R. Kell",
        )
        prepared = (job.reduction(), job.trace(), [])

        def write(name: str, supersede: str | None = None) -> str | None:
            return certify(
                book,
                "KR-07",
                tmp_path / name,
                sign_off=job.SIGN_OFF,
                supersede=supersede,
                reductions=prepared,
                versions=job.VERSIONS,
                clock=clock,
            ).number

        first = write("a.pdf")
        assert first == f"{book.state().id[:8]}-1"
        assert write("a.html") == first
        book.append("remark", {"occupation": 1, "text": "gate locked since"}, "R. Kell")
        second = write("b.json", supersede="remark added")
        assert second == f"{book.state().id[:8]}-2"
        assert [entry.kind for entry in book.state().documents] == ["certificate", "certificate"]
        assert all(entry.hash == entry.expected_hash() for entry in book.entries())
        for name in ("a.pdf", "a.html", "b.json"):
            lines = verify_certificate(tmp_path / name, book)
            assert all(holds for holds, _ in lines), lines
        assert verify_certificate(tmp_path / "a.pdf", book)[0][1].startswith(f"SUPERSEDED by {second}")
