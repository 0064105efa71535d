"""`new`: a book from a session file, or nothing at all."""

from __future__ import annotations


def test_new_makes_a_book_that_offers_the_session(tmp_path, session, fieldbook) -> None:
    said = fieldbook("new", tmp_path / "a.book", "--from", session, "--json")
    assert said.code == 0
    assert said.json["schema"] == "fieldbook.new/1"
    assert len(said.json["book"]["id"]) == 36
    assert fieldbook("marks", "list", tmp_path / "a.book", "--json").json["marks"][0]["name"] == "KR-07"
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.book", "session.toml"], "nothing beside it"


def test_new_refuses_and_leaves_nothing(tmp_path, session, book, fieldbook) -> None:
    before = book.read_bytes()
    assert fieldbook("new", book, "--from", session).code == 2
    assert book.read_bytes() == before
    session.write_text(session.read_text().replace("max_hdop", "max_hodp"))
    said = fieldbook("new", tmp_path / "b.book", "--from", session)
    assert said.code == 2
    assert '"max_hdop"' in said.err
    assert fieldbook("new", tmp_path / "b.book", "--from", tmp_path / "none.toml").code == 2
    assert not (tmp_path / "b.book").exists()
    assert fieldbook("new", tmp_path / "no folder" / "c.book", "--from", tmp_path / "session.toml").code == 2
