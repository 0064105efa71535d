"""The user's settings: found by receiver, refused where wrong, frozen into the session tree, never read at reduction."""

from __future__ import annotations

import subprocess
import sys
import tomllib
from decimal import Decimal
from pathlib import Path

import pytest

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, canonical_bytes
from fieldbook.model.session import FixClass
from fieldbook.settings.session import load_session, merged, session_from_tree
from fieldbook.settings.user import user_classes, user_file, with_user_class

SAMPLE = Path(__file__).parent / "contract_sample.toml"
GOOD = """\
[class."0001"]
horizontal_m = 0.0060
vertical_m = 0.012
correlation_s = 180
accept_quality = [4]
source = "own field test, May 2026"
"""


def settings(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "fieldbook.toml"
    path.write_text(text, encoding="utf-8")
    return path


def tree(**receiver: object) -> Tree:
    return merged(load_session(SAMPLE).tree, {"receiver": receiver})


def test_the_serial_is_enough_and_digits_stay_as_typed(tmp_path: Path) -> None:
    path = settings(tmp_path, GOOD)
    found = with_user_class(tree(serial="0001", maker="Demo", model="R1"), path)
    assert found["receiver"]["class"]["horizontal_m"] == "0.0060"
    session = session_from_tree(found)
    assert session.receiver.fix_class == FixClass(
        0.006, 0.012, 180.0, 'own field test, May 2026 (user settings, "0001")'
    )
    assert session.tree == found, "a tree as the book keeps it"
    assert canonical_bytes(found)
    rest = {key: value for key, value in found.items() if key != "receiver"}
    assert rest == {key: value for key, value in tree().items() if key != "receiver"}


@pytest.mark.parametrize(
    ("name", "receiver", "matches"),
    [
        ("demo  r1", {"maker": "Demo", "model": "R1", "serial": "7"}, True),
        ("Demo R1 7", {"maker": "Demo", "model": "R1", "serial": "7"}, True),
        ("Demo R1 8", {"maker": "Demo", "model": "R1", "serial": "7"}, False),
        ("Demo", {"maker": "Demo", "model": "R1"}, False),
        ("R1", {"model": "R1"}, False),
        ("0001", {}, False),
    ],
)
def test_names(tmp_path: Path, name: str, receiver: Tree, matches: bool) -> None:
    path = settings(tmp_path, GOOD.replace("0001", name))
    assert ("class" in with_user_class(tree(**receiver), path)["receiver"]) is matches


def test_the_most_specific_name_wins(tmp_path: Path) -> None:
    names = {"Demo R1": "0.009", "7": "0.008", "Demo R1 7": "0.007"}
    parts = [GOOD.replace("0001", name).replace("0.0060", size) for name, size in names.items()]
    receiver = {"maker": "Demo", "model": "R1", "serial": "7"}
    for count, size in ((3, "0.007"), (2, "0.008"), (1, "0.009")):
        path = settings(tmp_path, "\n".join(parts[:count]))
        assert with_user_class(tree(**receiver), path)["receiver"]["class"]["horizontal_m"] == size


def test_a_class_in_the_session_stands(tmp_path: Path) -> None:
    own = {"horizontal_m": "0.01", "vertical_m": "0.02", "correlation_s": "300", "source": "session"}
    given = tree(**{"serial": "0001", "class": own})
    assert with_user_class(given, settings(tmp_path, GOOD)) is given


@pytest.mark.parametrize(("tested", "matches"), [("[4]", False), ("[4, 5]", True), ("[1, 2, 4, 5]", True)])
def test_a_test_of_one_fix_says_nothing_of_another(tmp_path: Path, tested: str, matches: bool) -> None:
    given = merged(tree(serial="0001"), {"requirement": {"accept_quality": [4, 5]}})
    found = with_user_class(given, settings(tmp_path, GOOD.replace("[4]", tested)))
    assert ("class" in found["receiver"]) is matches


def test_without_a_file_nothing_changes(tmp_path: Path) -> None:
    given = tree(serial="0001")
    assert with_user_class(given, tmp_path / "none.toml") is given
    assert user_classes(tmp_path / "none.toml") == {}
    assert user_classes(settings(tmp_path, "")) == {}


@pytest.mark.parametrize(
    ("old", "new", "fragments"),
    [
        ("horizontal_m", "horizontal", ["line 2", '"horizontal"', '"horizontal_m"']),
        ("[class.", "[clas.", ["line 1", '"clas"', '"class"']),
        ("0.0060", "-0.006", ["line 2", "above zero"]),
        ("180", '"180"', ["line 4", "without quotes"]),
        ("[4]", "[8]", ["line 5", "qualities 1 to 5"]),
        ('source = "own field test, May 2026"\n', "", ["line 1", "source is missing"]),
        ("accept_quality = [4]\n", "", ["accept_quality is missing"]),
        ('[class."0001"]', "[class", ["no valid TOML"]),
        (GOOD, "class = 3\n", ["line 1", "class must be a table"]),
        (GOOD, '[class]\n"0001" = 3\n', ["0001", "must be a table"]),
        (GOOD, GOOD + GOOD.replace("0001", " 0001 "), ["the same receiver"]),
        (GOOD, "colour = 'red'\n" + GOOD, ["line 1", '"colour"']),
    ],
)
def test_what_is_wrong_is_named_with_its_line(tmp_path: Path, old: str, new: str, fragments: list[str]) -> None:
    assert old in GOOD
    path = settings(tmp_path, GOOD.replace(old, new))
    with pytest.raises(UsageError) as caught:
        with_user_class(tree(serial="0001"), path)
    for fragment in [*fragments, str(path)]:
        assert fragment in caught.value.text
    assert caught.value.remedy


def test_no_text_and_no_permission(tmp_path: Path) -> None:
    path = tmp_path / "fieldbook.toml"
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(UsageError, match="no text file"):
        user_classes(path)
    folder = tmp_path / "folder.toml"
    folder.mkdir()
    with pytest.raises(UsageError, match="cannot be read"):
        user_classes(folder)


def test_the_place_follows_the_platform(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    import platformdirs

    monkeypatch.setattr(platformdirs, "user_config_path", lambda name, **_: tmp_path / name)
    assert user_file() == tmp_path / "fieldbook" / "fieldbook.toml"
    (tmp_path / "fieldbook").mkdir()
    user_file().write_text(GOOD, encoding="utf-8")
    assert set(user_classes()) == {"0001"}
    assert "class" in with_user_class(tree(serial="0001"))["receiver"]


def test_the_module_is_light_and_no_reduction_knows_it() -> None:
    """Reproducible elsewhere: the layer that reduces must not import the user's settings."""
    code = "import fieldbook.reduce.occupation, sys; assert 'fieldbook.settings.user' not in sys.modules"
    subprocess.run([sys.executable, "-c", code], cwd=SAMPLE.parents[2], check=True)
    assert tomllib.loads(GOOD, parse_float=Decimal)["class"]["0001"]["horizontal_m"] == Decimal("0.0060")
