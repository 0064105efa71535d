"""Every action by its keys: what it writes, what it asks, and that the safe answer changes nothing."""

from __future__ import annotations

import asyncio
from pathlib import Path

import pytest
from textual.events import Key

from fieldbook.screens.actions import ACTIONS, BY_NAME, PAGES, foot_text, for_page
from fieldbook.screens.ask import Question
from fieldbook.screens.big import BigView
from fieldbook.screens.book_screen import BookScreen
from fieldbook.screens.frames_view import FramesView
from fieldbook.screens.keys_page import KeysView, keys_rows

from .fakes import SESSION_TREE, FakeBridge
from .waiting import SIZES, desk, form, on_desk, opened, screen_text, see, typed, wait_until


def kinds(bridge: FakeBridge) -> list[str]:
    return [kind for kind, _ in bridge.calls]


async def question(pilot: object) -> None:
    await wait_until(pilot, lambda: isinstance(pilot.app.screen, Question), "a question")  # type: ignore[arg-type, attr-defined]


# --- the table


def test_one_letter_means_one_thing() -> None:
    keys = [key for item in ACTIONS for key in item.keys.split(",")]
    assert len(keys) == len(set(keys))
    assert not any(key.startswith("ctrl") for key in keys)
    digits = {str(n) for n in range(1, len(PAGES) + 1)}
    assert not digits & set(keys)


def test_every_action_has_a_method_and_stands_in_the_help() -> None:
    text = "\n".join("".join(span for span, _ in line) for line in keys_rows("occupation", 100))
    for item in ACTIONS:
        assert callable(getattr(BookScreen, f"do_{item.name}")), item.name
        assert item.help in text
        assert set(item.pages) <= set(PAGES)


@pytest.mark.parametrize("page", PAGES)
@pytest.mark.parametrize("width", [80, 120])
def test_foot_line_fits_and_shows_only_keys_that_work(page: str, width: int) -> None:
    pairs = foot_text(page, width)
    assert sum(len(key) + len(label) + 3 for key, label in pairs) <= width + 2
    labels = {item.label for item in for_page(page)}
    assert all(label in labels for _, label in pairs)
    assert pairs[-1] == ("?", "keys")


def test_writing_actions_name_a_command() -> None:
    for name in (
        "load_session",
        "height",
        "antenna",
        "point",
        "link",
        "start",
        "remark",
        "end",
        "issue",
        "draft",
        "strike",
    ):
        assert BY_NAME[name].command


# --- writing


@pytest.mark.parametrize("size", SIZES, ids=str)
def test_session_file_by_typed_path(size: tuple[int, int]) -> None:
    async def go() -> None:
        bridge = FakeBridge(with_session=False)
        async with opened(bridge, size) as pilot:
            await pilot.press("f")
            await form(pilot)
            await typed(pilot, "nowhere.txt")
            await pilot.press("enter")
            await see(pilot, "cannot be read", "Check the path")
            await typed(pilot, "session.toml")
            await pilot.press("enter")
            await on_desk(pilot)
            await see(pilot, "session of KR-07 written", "Kestrel Ridge control")
            assert kinds(bridge) == ["session"]

    asyncio.run(go())


@pytest.mark.parametrize("size", SIZES, ids=str)
def test_remark_with_one_key_from_any_page(size: tuple[int, int]) -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge, size) as pilot:
            for page in "19":
                await pilot.press(page, "r")
                await form(pilot)
                await pilot.press("w", "e", "t", "enter")
                await on_desk(pilot)
                await see(pilot, "remark written")
            assert bridge.calls[0] == ("remark", {"occupation": 1, "text": "wet"})
            await pilot.press("4")
            await see(pilot, "wet · R. Kell")

    asyncio.run(go())


@pytest.mark.parametrize("size", SIZES, ids=str)
def test_height_during_occupation_is_judged_while_typed(size: tuple[int, int]) -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge, size) as pilot:
            await pilot.press("h")
            await form(pilot)
            await see(pilot, "which distance are you reading", "rim notch")
            await pilot.press(*"1.6320")
            # the slip with both figures it leads to
            await see(pilot, "Likely slip", "1.4946 m")
            await see(pilot, "READ AGAIN", "1.5951 m")  # sqrt(1.632^2 - 0.15^2) - 0.03
            await typed(pilot, "1.5330")
            await see(pilot, "readings agree: 1.0 mm apart")
            await typed(pilot, "1,533")
            await pilot.press(*["enter"] * 6)
            await see(pilot, "decimal sign as a point")
            assert not bridge.calls
            await typed(pilot, "1.5330")
            await pilot.press(*["enter"] * 6)
            await on_desk(pilot)
            await see(pilot, "written: slant 1.5330 m after")
            kind, body = bridge.calls[0]
            assert kind == "height"
            assert body == {
                "occupation": 1,
                "method": "slant",
                "value": "1.5330",
                "unit": "m",
                "when": "after",
                "reader": "R. Kell",
            }

    asyncio.run(go())


def test_height_before_occupation_joins_the_next_session() -> None:
    async def go() -> None:
        bridge = FakeBridge()
        async with opened(bridge) as pilot:
            await pilot.press("3", "h")
            await form(pilot)
            await pilot.press("up", "right", "down")  # vertical
            await typed(pilot, "4.903")
            await pilot.press("down", "right", "down", "down", "down", "down", "enter")  # ft
            await on_desk(pilot)
            kind, body = bridge.calls[0]
            assert kind == "session"
            assert body["tree"]["setup"]["height"][-1] == {
                "method": "vertical",
                "value": "4.903",
                "unit": "ft",
                "when": "before",
                "reader": "R. Kell",
            }

    asyncio.run(go())


def test_reading_after_the_end_belongs_to_the_last_occupation() -> None:
    async def go() -> None:
        bridge = FakeBridge(ended=True)
        async with opened(bridge) as pilot:
            await pilot.press("3", "h")
            await form(pilot)
            await see(pilot, "of the next occupation")
            await typed(pilot, "1.5330")
            await pilot.press("down", "down", "d")
            await see(pilot, "of occupation 1, KR-07")
            await pilot.press(*["enter"] * 4)
            await see(pilot, "no occupation is open")
            await pilot.press("a")
            await see(pilot, "readings agree: 1.0 mm apart")
            await pilot.press(*["enter"] * 4)
            await on_desk(pilot)
            await see(pilot, "occupation 1 (entry")
            kind, body = bridge.calls[0]
            assert (kind, body["occupation"], body["when"]) == ("height", 1, "after")

    asyncio.run(go())


def test_readings_that_differ_may_be_explained_by_a_decision() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await pilot.press("4", "v")
            await see(pilot, "nothing is to be explained")
            bridge.add_height(1, {"method": "slant", "value": "1.6", "unit": "m", "when": "after"})
            await wait_until(pilot, lambda: len(desk(pilot).view.state.occupations[1].heights) == 2, "the reading")  # type: ignore[union-attr]
            await pilot.press("v")
            await form(pilot)
            await see(pilot, "WHY DO THE READINGS", "differ by")
            await pilot.press(*"sank", "enter")
            await on_desk(pilot)
            await see(pilot, "decision written")
            assert bridge.calls[-1] == (
                "decision",
                {"occupation": 1, "height_difference": "explained", "reason": "sank"},
            )

    asyncio.run(go())


def test_reading_that_cannot_be_is_refused_with_the_reason() -> None:
    async def go() -> None:
        bridge = FakeBridge()
        async with opened(bridge) as pilot:
            await pilot.press("h")
            await form(pilot)
            await pilot.press("up", "down")
            await typed(pilot, "0.1")
            await pilot.press(*["enter"] * 6)
            await see(pilot, "The slant reading 0.1000 m is not", "(not the diameter)")
            await pilot.press("escape")
            await on_desk(pilot)
            assert not bridge.calls

    asyncio.run(go())


def test_mark_is_described_and_chosen() -> None:
    async def go() -> None:
        bridge = FakeBridge()
        async with opened(bridge) as pilot:
            await pilot.press("2", "n")
            await form(pilot)
            await pilot.press(*"KR-07", "enter", "enter", "enter", "enter", "enter")
            await see(pilot, "there is a mark of this name")
            await typed(pilot, "KR-08")
            await pilot.press("enter", *"bolt", "enter", "enter", "enter", "enter")
            await on_desk(pilot)
            await see(pilot, "KR-08", "it is the next set-up's")
            assert kinds(bridge) == ["mark", "session"]
            assert bridge.calls[1][1]["tree"]["mark"] == {"name": "KR-08", "description": "bolt"}
            await see(pilot, "2 in the book")
            await pilot.press("up", "enter")
            await wait_until(pilot, lambda: desk(pilot).page == "setup", "the set-up page")
            assert bridge.calls[2][1]["tree"]["mark"]["name"] == "KR-07"

    asyncio.run(go())


def test_mark_cannot_be_changed_under_an_open_occupation() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await pilot.press("2", "enter")
            await see(pilot, "is open: end it first")
            assert not bridge.calls

    asyncio.run(go())


def test_antenna_point_and_link_are_written_where_they_belong() -> None:
    async def go() -> None:
        bridge = FakeBridge()
        async with opened(bridge) as pilot:
            await pilot.press("3", "a")
            top = await form(pilot)
            while top.fields[top.here].key != "serial":
                await pilot.press("up")
            await typed(pilot, "0099")
            await pilot.press(*["enter"] * 11)
            await on_desk(pilot)
            await see(pilot, "serial 0099")
            await pilot.press("p")
            top = await form(pilot)
            await pilot.press(*["up"] * 7)
            await pilot.press("m", *["enter"] * 7)
            await see(pilot, "the height keyed into the")
            await pilot.press("escape")
            await on_desk(pilot)
            await pilot.press("k")
            await form(pilot)
            await typed(pilot, "nonsense")
            await pilot.press("enter")
            await see(pilot, "This is no link")
            await typed(pilot, "tcp://base.example:2101")
            await pilot.press("enter")
            await on_desk(pilot)
            await see(pilot, "tcp://base.example:2101")
            assert kinds(bridge) == ["session", "session"]

    asyncio.run(go())


def test_an_antenna_of_the_users_list_brings_its_values(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Calibrated: what the receiver applies must be said before it is written; then block and offset stand in the session."""
    from invented_antex import FILE

    from fieldbook.commands import run

    monkeypatch.setattr("fieldbook.settings.antennas.antennas_folder", lambda: tmp_path / "antennas")
    (tmp_path / "invented.atx").write_text(FILE, encoding="ascii")
    assert run(["antenna", "add", str(tmp_path / "invented.atx"), "--type", "DEMO-A1 NONE", "--name", "demo"]) == 0

    async def go() -> None:
        bridge = FakeBridge()
        async with opened(bridge) as pilot:
            await pilot.press("3", "a")
            top = await form(pilot)
            while top.fields[top.here].key != "listed":
                await pilot.press("down")
            await typed(pilot, "demo-9")
            await pilot.press("enter")
            await see(pilot, 'no antenna "demo-9"')
            await typed(pilot, "demo")
            await pilot.press("enter")
            await see(pilot, "Say which signals", "G01, G02")
            await pilot.press(*"L1", "enter", "enter", "enter")
            await see(pilot, "it must be said what")
            while top.fields[top.here].key != "receiver_applies":
                await pilot.press("down")
            await pilot.press("right", "down", "enter")  # nothing
            await on_desk(pilot)
            kind, body = bridge.calls[0]
            assert kind == "session"
            antenna = body["tree"]["antenna"]
            assert antenna["calibration"]["file"] == "invented.atx"
            assert antenna["arp_to_phase_centre_m"]["up"] == "0.08730"
            assert antenna["receiver_applies"] == "nothing"
            await see(pilot, "by invented.atx, L1")

    asyncio.run(go())


def test_reading_that_disagrees_is_said_aloud_and_taken_back_with_a_reason() -> None:
    async def go() -> None:
        bridge = FakeBridge()
        async with opened(bridge) as pilot:
            await pilot.press("3", "h")
            await form(pilot)
            await typed(pilot, "1.632")
            await pilot.press(*["enter"] * 6)
            await on_desk(pilot)
            await see(pilot, "READ AGAIN")
            await pilot.press("x")
            await form(pilot)
            await pilot.press(*"misread", "enter")
            await on_desk(pilot)
            await see(pilot, "taken back: slant 1.632 m before", "1 reading")
            assert "READ AGAIN" not in screen_text(pilot)
            assert kinds(bridge) == ["session", "remark", "session"]
            assert "misread" in bridge.calls[1][1]["text"]

    asyncio.run(go())


def test_reading_of_an_open_occupation_is_struck_by_its_entry() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await pilot.press("3", "x")
            await see(pilot, "in the occupation's own entry")
            bridge.add_height(1, {"method": "slant", "value": "1.6", "unit": "m", "when": "after"})
            await see(pilot, "2 readings")
            await pilot.press("x")
            await form(pilot)
            await pilot.press(*"misread", "enter")
            await wait_until(pilot, lambda: kinds(bridge)[-1] == "strike", "the strike")
            assert bridge.calls[-1][1] == {"seq": bridge.written[-2].seq, "reason": "misread"}

    asyncio.run(go())


# --- recording


@pytest.mark.parametrize("size", SIZES, ids=str)
def test_start_asks_then_begins_and_opens_the_occupation(size: tuple[int, int]) -> None:
    async def go() -> None:
        bridge = FakeBridge()
        async with opened(bridge, size) as pilot:
            await pilot.press("3", "s")
            await see(pilot, "READ THE MARK: KR-07")
            assert "1998" not in screen_text(pilot), "not before it was read"
            await pilot.press("escape")
            await on_desk(pilot)
            await pilot.press("s")
            await form(pilot)
            await typed(pilot, "KR-08 1998")
            await pilot.press("enter")
            await question(pilot)
            await see(pilot, "START RECORDING?", "reports the phase centre", 'the description "KR 07 1998"')
            await pilot.press("enter")
            await on_desk(pilot)
            assert not bridge.calls
            await pilot.press("s")
            await form(pilot)
            await typed(pilot, "kr07/1998")
            await pilot.press("enter")
            await question(pilot)
            await see(pilot, "as it should")
            await pilot.press("y")
            await wait_until(pilot, lambda: desk(pilot).page == "occupation", "the occupation page")
            await see(pilot, "recording", "FIGURES")
            assert kinds(bridge) == ["begin"]
            assert bridge.calls[0][1]["setup"]["height"] == SESSION_TREE["setup"]["height"]
            assert bridge.calls[0][1]["setup"]["inscription_read"] == "kr07/1998"

    asyncio.run(go())


def test_readings_of_the_last_setup_are_not_carried_over() -> None:
    async def go() -> None:
        async with opened(FakeBridge(ended=True)) as pilot:
            await pilot.press("3")
            await see(pilot, "no reading yet", "as in the last set-up")

    asyncio.run(go())


def test_recorder_that_is_gone_is_started_again() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        bridge.alive = False
        async with opened(bridge) as pilot:
            await see(pilot, "RECORDER GONE")
            await pilot.press("4", "s")
            await wait_until(pilot, lambda: ("start_recorder", 1) in bridge.calls, "the recorder started")
            await see(pilot, "RTK fixed")

    asyncio.run(go())


def test_two_slips_never_end_an_occupation() -> None:
    """E and any neighbour of it, twice; Enter and Esc are always safe."""

    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            for slip in ("e", "w", "r", "d", "s", "3", "4", "enter", "escape"):
                await pilot.press("4", "e")
                await question(pilot)
                await pilot.press(slip)
                await pilot.press("escape")
                await on_desk(pilot)
            assert ("end", 1) not in bridge.calls
            await pilot.press("e")
            await question(pilot)
            await see(pilot, "END THE OCCUPATION?", "NOT YET", "Read the height of the antenna again")
            await pilot.press("y")
            await see(pilot, "WHY IS IT LEFT OPEN?", "time on mark", "height readings", "prints on the certificate")
            await pilot.press("escape")
            await on_desk(pilot)
            assert ("end", 1) not in bridge.calls, "without reasons it goes on"

    asyncio.run(go())


def test_what_is_left_open_gets_its_reason_before_the_end() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await pilot.press("4", "e")
            await question(pilot)
            await pilot.press("y")
            await form(pilot)
            await pilot.press("down", "enter")
            await see(pilot, "WHY IS IT LEFT OPEN?", "is needed")
            await typed(pilot, "thunderstorm")
            await pilot.press("enter", "enter")  # the second line takes the reason above it
            await wait_until(pilot, lambda: ("end", 1) in bridge.calls, "the end")
            await see(pilot, "occupation 1 is ended")
            assert bridge.left_open == [("minimum_time_s", "thunderstorm"), ("height_readings", "thunderstorm")]

    asyncio.run(go())


@pytest.mark.parametrize("key", ["q", "ctrl+c"])
def test_quit_asks_and_the_recorder_is_left_running(key: str) -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            for safe in ("enter", "escape"):
                await pilot.press(key)
                await question(pilot)
                await see(pilot, "LEAVE THE SCREEN?", "the recorder runs on")
                await pilot.press(safe)
                await on_desk(pilot)
            await pilot.press(key)
            await question(pilot)
            await pilot.press("e")  # end asks once more
            await see(pilot, "END THE OCCUPATION?")
            await pilot.press("enter")
            await on_desk(pilot)
            await pilot.press(key)
            await question(pilot)
            await pilot.press("l")
            await wait_until(pilot, lambda: pilot.app.return_value == 0, "the app to leave")
            assert bridge.alive
            assert ("end", 1) not in bridge.calls

    asyncio.run(go())


@pytest.mark.parametrize("size", SIZES, ids=str)
def test_graph_turns_the_lower_figure(size: tuple[int, int]) -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge, size=size) as pilot:
            await see(pilot, "FIGURES")
            if size[0] < 110:
                await pilot.press("tab")
            await see(pilot, "HEIGHT mm from mean")
            assert not bridge.wants_running, "the running mean costs something: it is made only when looked at"
            await pilot.press("g")
            await see(pilot, "RUNNING MEAN", "inside the wanted figures since 08:09 UTC", "height, wanted 40 mm")
            await pilot.press("g")
            await see(pilot, "HEIGHT mm from mean")
            assert not bridge.wants_running

    asyncio.run(go())


@pytest.mark.parametrize("size", SIZES, ids=str)
def test_criteria_of_a_document_become_the_requirement(size: tuple[int, int]) -> None:
    async def go() -> None:
        bridge = FakeBridge()
        async with opened(bridge, size=size) as pilot:
            await pilot.press("c")
            await see(pilot, "WHAT MUST THE MARK REACH?", "linz-order-5", "Network accuracy of order 5", "fix quality")
            for _ in range(3):
                await pilot.press("right")
            await see(pilot, "ngs-rt1", "at least 3 min", "for you to see to", "base line of at most 10 km")
            await pilot.press("enter")
            await on_desk(pilot)
            await wait_until(pilot, lambda: "session" in kinds(bridge), "the session")
            wanted = dict(bridge.calls)["session"]["tree"]["requirement"]
            assert wanted["max_pdop"] == "2.0"
            assert "from memory: check before use" in wanted["source"]
            assert "max_hdop" not in wanted

    asyncio.run(go())


# --- paper and diary


@pytest.mark.parametrize("size", SIZES, ids=str)
def test_certificate_is_issued_where_typed(size: tuple[int, int]) -> None:
    async def go() -> None:
        bridge = FakeBridge(ended=True)
        async with opened(bridge, size) as pilot:
            await pilot.press("7")
            await see(pilot, "Nothing is missing.")
            await pilot.press("i")
            top = await form(pilot)
            assert top.values()["path"].endswith("KR-07-1")
            await pilot.press(*["enter"] * 3)
            await see(pilot, "is needed: write it")
            await typed(pilot, "A. Firth; 1234")
            await pilot.press("enter")
            await on_desk(pilot)
            await see(pilot, "certificate 00000000-1 is in", "KR-07-1.pdf")
            name, (mark, number, out, sign_off, supersede) = bridge.calls[0]
            assert (name, mark, number, sign_off, supersede) == ("certify", "KR-07", 1, "A. Firth; 1234", "")
            assert out.endswith("KR-07-1.pdf")
            await see(pilot, "certificate 00000000-1   occupation 1")  # in the list of what was issued
            await pilot.press("i")
            await form(pilot)
            await see(pilot, "Supersedes")
            await pilot.press("escape")

    asyncio.run(go())


def test_what_is_missing_is_named() -> None:
    async def go() -> None:
        bridge = FakeBridge(ended=True)
        bridge.missing_texts = ["Firm is not stated.", "Finding 'simulated' is a stop."]
        async with opened(bridge) as pilot:
            await pilot.press("7")
            await see(pilot, "2 things keep this paper a draft", "Firm is not stated.", "simulated")
            await pilot.press("d")
            await form(pilot)
            await pilot.press("enter", "enter")
            await on_desk(pilot)
            await see(pilot, "draft is in")

    asyncio.run(go())


def test_open_occupation_gives_no_paper() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await pilot.press("7")
            await see(pilot, "KR-07, occupation 1, open")
            await pilot.press("i")
            await see(pilot, "is open: end it first")
            assert not bridge.calls

    asyncio.run(go())


@pytest.mark.parametrize("size", SIZES, ids=str)
def test_strike_with_reason_keeps_the_line_legible(size: tuple[int, int]) -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        bridge._entry("remark", {"occupation": 1, "text": "lorry parked 8 m N"}, "R. Kell")
        async with opened(bridge, size) as pilot:
            await pilot.press("8")
            await see(pilot, "lorry parked 8 m N")
            await pilot.press("x")
            await form(pilot)
            await pilot.press("enter")
            await see(pilot, "is needed")
            await pilot.press(*"wrong", "enter")
            await on_desk(pilot)
            await see(pilot, "╌ struck", "lorry parked 8 m N")
            kind, body = bridge.calls[0]
            assert (kind, body["reason"]) == ("strike", "wrong")
            struck = desk(pilot).current.query_one("Panel")
            styles = [style for line in struck.rows for text, style in line if "lorry" in text]  # type: ignore[attr-defined]
            assert "struck" in styles

    asyncio.run(go())


def test_what_the_program_recorded_is_never_struck() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await pilot.press("8")
            await see(pilot, "begins: KR-07")
            await pilot.press("w")
            await see(pilot, "bytes sealed")
            await pilot.press("down", "x")
            await see(pilot, "never struck out")
            assert not bridge.calls

    asyncio.run(go())


# --- looking


def test_big_keys_palette_and_themes() -> None:
    async def go() -> None:
        async with opened(FakeBridge(recording=True)) as pilot:
            await pilot.press("b")
            await wait_until(pilot, lambda: isinstance(pilot.app.screen, BigView), "the distance view")
            await see(pilot, "█████")
            await pilot.press("b")
            await on_desk(pilot)
            await pilot.press("question_mark")
            await wait_until(pilot, lambda: isinstance(pilot.app.screen, KeysView), "the keys")
            await see(pilot, "Write a height reading.")
            await pilot.press("down", "pagedown", "escape")
            await on_desk(pilot)
            await pilot.press("colon")
            await wait_until(pilot, lambda: pilot.app.screen is not desk(pilot), "the palette")
            await pilot.press(*"remark", "enter")
            await form(pilot)
            await pilot.press("escape")
            await on_desk(pilot)
            for theme in ("dusk", "lamp", "console", "noon"):
                await pilot.press("t")
                await see(pilot, f"light: {theme}")
            await pilot.press("t", "t", "t", "4", "tab")
            await see(pilot, "SKETCH")
            for panel in pilot.app.screen.query("Panel"):
                for y in range(panel.size.height if panel.display else 0):
                    assert panel.render_line(y).text.isascii()

    asyncio.run(go())


@pytest.mark.parametrize("size", SIZES, ids=str)
def test_frames_of_the_book(size: tuple[int, int]) -> None:
    """From the pages where frames are thought of; where the book knows no place, that is said."""

    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge, size) as pilot:
            await pilot.press("3", "m")
            await wait_until(pilot, lambda: isinstance(pilot.app.screen, FramesView), "the frames")
            await see(pilot, "FRAMES", "GDA2020, static", "What corrects this receiver")
            await pilot.press("down", "pagedown", "m")
            await on_desk(pilot)
            bridge.told = None
            await pilot.press("m")
            await see(pilot, "knows no place yet")

    asyncio.run(go())


def test_errors_of_writing_are_said_with_their_remedy() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            bridge.observer = ""
            await pilot.press("r")
            await form(pilot)
            await pilot.press("x", "enter")
            await see(pilot, "Nobody signs yet.", "Press 1, then O")
            await pilot.press("1", "o")
            await form(pilot)
            await pilot.press(*"M Rook", "enter")
            await on_desk(pilot)
            await see(pilot, "M Rook")
            assert "RECORDER GONE" not in screen_text(pilot)

    asyncio.run(go())


def test_copy_puts_the_coordinate_on_the_clipboard_with_what_belongs_to_it() -> None:
    async def go() -> None:
        bridge = FakeBridge(ended=True)
        async with opened(bridge) as pilot:
            await pilot.press("6")
            await see(pilot, "as observed")
            await pilot.press("y")
            await see(pilot, "COPY KR-07, occupation 1", "empty: to the clipboard")
            await pilot.press("enter", "enter")
            await on_desk(pilot)
            await see(pilot, "to the clipboard: KR-07, occupation 1: 23°40")
            assert "GDA2020 (EPSG:7843)" in pilot.app.clipboard
            assert "95 %" in pilot.app.clipboard

    asyncio.run(go())


@pytest.mark.parametrize(("key", "answer"), [("q", ""), ("b", None), ("r", None), ("question_mark", None)])
def test_a_key_that_bounces_takes_nothing_but_the_top_away(key: str, answer: str | None) -> None:
    """Two answers in one turn of the loop: the second comes from a screen that is going already."""

    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await pilot.press(key)
            await wait_until(pilot, lambda: pilot.app.screen is not desk(pilot), "something on top")
            top = pilot.app.screen
            for _ in range(3):
                top.dismiss(answer)
            await on_desk(pilot)
            await pilot.pause()
            assert pilot.app.is_running

    asyncio.run(go())


def test_enter_pressed_too_often_in_a_form_writes_once() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await pilot.press("r")
            top = await form(pilot)
            await typed(pilot, "lorry")
            for _ in range(4):
                top.post_message(Key("enter", None))
            await on_desk(pilot)
            await wait_until(pilot, lambda: "remark" in kinds(bridge), "the remark")
            assert kinds(bridge).count("remark") == 1
            assert pilot.app.is_running

    asyncio.run(go())
