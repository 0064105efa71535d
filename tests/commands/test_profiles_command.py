"""`fieldbook profiles`: the list and the table that goes into a session file."""

from __future__ import annotations

import tomllib


def test_list_and_show(fieldbook):
    listed = fieldbook("profiles", "list")
    assert listed.code == 0
    assert "ngs-rt1" in listed.out
    assert "from memory: check before use" in listed.out
    shown = fieldbook("profiles", "show", "linz-order-5")
    assert shown.code == 0
    assert tomllib.loads(shown.out)["requirement"]["in"] == "client frame"
    assert "# occupations = ...  the document leaves it open" in shown.out
    assert "for you to see to" in shown.err
    tree = fieldbook("profiles", "show", "ngs-rt1", "--json").json
    assert tree["schema"] == "fieldbook.profiles/1"
    assert tree["profiles"][0]["requirement"]["max_pdop"] == "2.0"
    assert len(fieldbook("profiles", "list", "--json").json["profiles"]) >= 9


def test_an_unknown_one_names_the_nearest(fieldbook):
    said = fieldbook("profiles", "show", "ngs-rt")
    assert said.code == 2
    assert "ngs-rt" in said.err.split("nearest known one", 1)[1]
