"""A signed book and its certificates through `verify`: whole, changed by somebody without the key, stripped, older, unsigned."""

from __future__ import annotations

import json
import re
import shutil
import sqlite3
from collections.abc import Callable
from contextlib import closing
from pathlib import Path

import pytest
from recorded_samples import record_into

from fieldbook.book import migrations
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.model.canonical import canonical_json
from fieldbook.model.entry import GENESIS, Entry, entry_hash

SIGN_OFF = "R. Kell; 4411"
ENDINGS = ("pdf", "html", "json")
Run = Callable[..., tuple[int, str, str]]


def call(*arguments: object) -> int:
    from fieldbook.commands import run

    return run([str(item) for item in arguments])


@pytest.fixture(scope="module")
def office(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A configuration folder that trusts R. Kell's key; the key itself lies elsewhere."""
    return tmp_path_factory.mktemp("office")


@pytest.fixture(scope="module")
def signed(short_session: Path, tmp_path_factory: pytest.TempPathFactory, office: Path) -> Path:
    """An ended, signed book with the signed certificate of its mark in four formats, all made by commands."""
    folder = tmp_path_factory.mktemp("signed")
    path = folder / "short.book"
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("XDG_CONFIG_HOME", str(folder / "config"))
        assert call("key", "new", "--name", "R. Kell", "--no-passphrase") == 0
        assert call("key", "export", "R. Kell", "--out", folder / "kell.toml") == 0
        assert call("observe", path, "--session", short_session) == 0
        assert call("entry", path, "remark", "--set", "text=dry", "--by", "R. Kell") == 0
        for ending in (*ENDINGS, "txt"):
            assert call("certify", path, "KR-07", "--out", folder / f"KR-07.{ending}", "--sign-off", SIGN_OFF) == 0
        patch.setenv("XDG_CONFIG_HOME", str(office))
        assert call("key", "trust", folder / "kell.toml") == 0
    return path


@pytest.fixture
def trusting(office: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Verify as somebody who trusts R. Kell's key."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(office))


def entries(path: Path) -> list[Entry]:
    with Book.open(path, clock=SystemClock()) as book:
        return book.entries()


def rewritten(path: Path, wanted: list[Entry]) -> None:
    """Put other entries into a book and chain them anew, with the triggers off: what somebody without a key can do."""
    with closing(sqlite3.connect(path, isolation_level=None)) as connection:
        triggers = connection.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
        for name, _ in triggers:
            connection.execute(f'DROP TRIGGER "{name}"')
        connection.execute("DELETE FROM entry")
        previous = GENESIS
        for seq, item in enumerate(wanted, 1):
            text = canonical_json(item.body)
            own = entry_hash(seq, item.utc, item.kind, text, item.observer, previous)
            row = (seq, item.utc, item.kind, text, item.observer, previous, own)
            connection.execute("INSERT INTO entry VALUES (?, ?, ?, ?, ?, ?, ?)", row)
            previous = own
        for _, sql in triggers:
            connection.execute(sql)


@pytest.mark.usefixtures("trusting")
def test_book_and_papers_hold(signed: Path, run_fieldbook: Run) -> None:
    papers = [signed.with_name(f"KR-07.{ending}") for ending in ENDINGS]
    code, out, _ = run_fieldbook("verify", signed, *papers, "--json")
    assert code == 0, out
    book, *files = json.loads(out)["files"]
    (line,) = [item["text"] for item in book["lines"] if item["where"] == "signatures"]
    last = entries(signed)[-1]
    assert last.kind == "signature"
    assert line.startswith(f"entries 1 to {last.seq - 1} of {last.seq} are covered by ")
    assert line.endswith("you trust it")
    assert any("no trusted time" in text for text in book["not_proven"])
    assert any("cut off at the end together with its signature" in text for text in book["not_proven"])
    for file in files:
        assert any(item["text"].startswith("Unchanged since it was signed by") for item in file["lines"])
        assert any(item["text"].startswith("Unchanged since issue") for item in file["lines"])


def test_every_act_of_the_person_is_signed_in_its_own_transaction(signed: Path) -> None:
    kinds = [entry.kind for entry in entries(signed)]
    assert kinds[:5] == ["book", "session", "occupation", "key", "signature"]
    for kind in ("occupation", "packed", "remark", "certificate", "rendered"):
        place = len(kinds) - 1 - kinds[::-1].index(kind)
        assert "signature" in kinds[place : place + 3], kind


@pytest.mark.parametrize("ending", ENDINGS)
@pytest.mark.usefixtures("trusting")
def test_a_lone_signed_certificate_of_a_trusted_key_is_unchanged(signed: Path, ending: str, run_fieldbook: Run) -> None:
    code, out, _ = run_fieldbook("verify", signed.with_name(f"KR-07.{ending}"))
    assert code == 0
    assert "Unchanged since it was signed by the key that calls itself R. Kell" in out
    assert "you trust it. A signature states no time." in out


@pytest.mark.parametrize("ending", ENDINGS)
def test_a_lone_signed_certificate_of_an_unknown_key_is_consistent(
    signed: Path, ending: str, run_fieldbook: Run
) -> None:
    code, out, _ = run_fieldbook("verify", signed.with_name(f"KR-07.{ending}"))
    assert code == 0
    assert "you have not said that you trust it" in out
    assert "Unchanged since it was signed" not in out


def test_the_paper_shows_the_fingerprint_and_keeps_sign_off_apart(signed: Path) -> None:
    text = re.sub(r"\s+", " ", signed.with_name("KR-07.txt").read_text(encoding="utf-8"))
    block = json.loads(signed.with_name("KR-07.json").read_text(encoding="utf-8"))["signature"]
    fingerprint = " ".join(block["fingerprint"][place : place + 4] for place in range(0, 32, 4))
    assert f"by the key that calls itself R. Kell, fingerprint {fingerprint}. It is no sign-off" in text
    assert "Licence 4411" in text


@pytest.mark.parametrize("key", ["name", "algorithm", "public_key", "fingerprint", "signature"])
@pytest.mark.usefixtures("trusting")
def test_every_changed_value_of_a_certificates_signature_is_found(
    signed: Path, tmp_path: Path, key: str, run_fieldbook: Run
) -> None:
    """Rendered again after the change, so that nothing but the signature can tell."""
    from fieldbook.certificate.issue import RENDERERS

    facts = json.loads(signed.with_name("KR-07.json").read_text(encoding="utf-8"))
    value = facts["signature"][key]
    facts["signature"][key] = ("0" if value[0] != "0" else "1") + value[1:]
    for ending in ENDINGS:
        forged = tmp_path / f"KR-07.{ending}"
        forged.write_bytes(RENDERERS[ending](facts))
        code, out, _ = run_fieldbook("verify", forged)
        assert code == 1, out
        code, out, _ = run_fieldbook("verify", signed, forged)
        assert code == 1, out


@pytest.mark.usefixtures("trusting")
def test_changed_facts_with_a_fitting_digest_are_found_by_the_signature(
    signed: Path, tmp_path: Path, run_fieldbook: Run
) -> None:
    from fieldbook.certificate.identity import sealed
    from fieldbook.certificate.issue import RENDERERS

    facts = json.loads(signed.with_name("KR-07.json").read_text(encoding="utf-8"))
    signature = facts["signature"]
    facts["job"]["client"] = "somebody else"
    forged = tmp_path / "KR-07.json"
    forged.write_bytes(RENDERERS["json"]({**sealed(facts), "signature": signature}))
    code, out, _ = run_fieldbook("verify", forged)
    assert code == 1
    assert "was not made over these facts" in out
    for block in ({}, None, "x", {**signature, "more": "1"}, [1]):
        forged.write_bytes(json.dumps({**facts, "signature": block}).encode())
        assert run_fieldbook("verify", forged)[0] == 1


@pytest.mark.usefixtures("trusting")
def test_a_signature_taken_off_a_certificate_is_found_with_its_book_only(
    signed: Path, tmp_path: Path, run_fieldbook: Run
) -> None:
    from fieldbook.certificate.issue import RENDERERS

    facts = json.loads(signed.with_name("KR-07.json").read_text(encoding="utf-8"))
    del facts["signature"]
    stripped = tmp_path / "KR-07.pdf"
    stripped.write_bytes(RENDERERS["pdf"](facts))
    code, out, _ = run_fieldbook("verify", stripped)
    assert code == 0
    assert "Consistent in itself, and unsigned." in out
    code, out, _ = run_fieldbook("verify", signed, stripped)
    assert code == 1
    assert "its signature was added or taken off" in out


@pytest.mark.usefixtures("trusting")
def test_a_replaced_remark_in_a_chain_made_anew_is_found(signed: Path, tmp_path: Path, run_fieldbook: Run) -> None:
    copy = tmp_path / "copy.book"
    shutil.copy(signed, copy)
    found = entries(copy)
    place = next(number for number, entry in enumerate(found) if entry.kind == "remark")
    found[place].body["text"] = "wet"
    rewritten(copy, found)
    code, out, _ = run_fieldbook("verify", copy)
    assert code == 1
    assert "the chain and every hash hold" in out  # nothing but the signatures can tell
    assert "their hashes were computed anew, which damage does not do" in out


@pytest.mark.usefixtures("trusting")
def test_stripped_signatures_are_found(signed: Path, tmp_path: Path, run_fieldbook: Run) -> None:
    copy = tmp_path / "copy.book"
    shutil.copy(signed, copy)
    rewritten(copy, [entry for entry in entries(copy) if entry.kind != "signature"])
    code, out, _ = run_fieldbook("verify", copy)
    assert code == 1
    assert "though entry 4 says that R. Kell signs from there on" in out


def test_damage_is_told_from_tampering(signed: Path, tmp_path: Path, run_fieldbook: Run) -> None:
    copy = tmp_path / "copy.book"
    shutil.copy(signed, copy)
    data = bytearray(copy.read_bytes())
    place = data.index(b'"text":"dry"') + 8
    data[place] ^= 1
    copy.write_bytes(bytes(data))
    code, out, _ = run_fieldbook("verify", copy)
    assert code == 1
    assert "looks like damage: one flipped bit in 'body' of entry" in out
    assert "the chain breaks at entry" in out
    assert re.search(r"entries 1 to \d+ of \d+ are covered by 2 signatures", out)  # what still stands


def test_a_book_of_an_older_version_is_signed_after_its_upgrade(
    tmp_path: Path, run_fieldbook: Run, monkeypatch
) -> None:
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    for version in range(1, migrations.version() + 1):
        path = tmp_path / f"old{version}.book"
        with monkeypatch.context() as patch:
            patch.setattr(migrations, "MIGRATIONS", migrations.MIGRATIONS[:version])
            with Book.create(path, clock=SystemClock(), observer="R. Kell") as book:
                book.append("remark", {"occupation": None, "text": "before"}, "R. Kell")
    assert call("key", "new", "--name", "R. Kell", "--no-passphrase") == 0
    for version in range(1, migrations.version() + 1):
        path = tmp_path / f"old{version}.book"
        assert call("entry", path, "remark", "--set", "text=after", "--by", "R. Kell") == 0
        code, out, _ = run_fieldbook("verify", path)
        assert code == 0, out
        assert re.search(r"entries 1 to (\d+) of \d+ are covered by 1 signature", out)


def test_without_a_key_everything_works_and_says_unsigned(
    short_session: Path, tmp_path: Path, run_fieldbook: Run
) -> None:
    path = tmp_path / "plain.book"
    assert record_into(path, short_session) == 1
    code, _, err = run_fieldbook("certify", path, "KR-07", "--out", tmp_path / "a.json", "--sign-off", SIGN_OFF)
    assert code == 0
    assert "unsigned: no key of R. Kell on this computer" in err
    assert "signature" not in json.loads((tmp_path / "a.json").read_text(encoding="utf-8"))
    assert not {entry.kind for entry in entries(path)} & {"key", "signature"}
    code, out, _ = run_fieldbook("verify", path, tmp_path / "a.json")
    assert code == 0
    assert "signatures: unsigned: no signature stands over any of its" in out
    code, out, _ = run_fieldbook("verify", tmp_path / "a.json")
    assert "Consistent in itself, and unsigned." in out


def test_a_standing_unsigned_certificate_stays_as_it_was_issued(
    short_session: Path, tmp_path: Path, run_fieldbook: Run, monkeypatch
) -> None:
    path = tmp_path / "plain.book"
    record_into(path, short_session)
    first, second = tmp_path / "a.json", tmp_path / "b.json"
    assert run_fieldbook("certify", path, "KR-07", "--out", first, "--sign-off", SIGN_OFF)[0] == 0
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    assert call("key", "new", "--name", "R. Kell", "--no-passphrase") == 0
    code, _, err = run_fieldbook("certify", path, "KR-07", "--out", second, "--sign-off", SIGN_OFF)
    assert code == 0
    assert "stands as it was issued, unsigned" in err
    assert first.read_bytes() == second.read_bytes()
