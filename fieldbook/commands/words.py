"""The words in which `status`, `watch` and `observe` tell the state of a recorder."""

from __future__ import annotations

from typing import Any

from fieldbook.model.epoch import QUALITY_WORDS
from fieldbook.model.rounding import decimals_for, rounded_up


def quality_words(quality: int | None) -> str:
    """`RTK fixed` for 4; the number itself where the standard gives none."""
    if quality is None:
        return "no quality"
    return QUALITY_WORDS.get(quality, f"quality {quality}")


def head_line(status: dict[str, Any]) -> str:
    """One plain line about a running, stopped or absent recorder."""
    occupation, recorder = status["occupation"], status["recorder"]
    if occupation is None:
        return "no occupation yet"
    if not recorder["alive"] and occupation["open"] and recorder.get("stopped"):
        return f"recorder stopped: {recorder['stopped']}"
    if not recorder["alive"]:
        gone = occupation["open"] and recorder.get("link_state") not in (None, "closed", "ended")
        return "RECORDER GONE: run the same `fieldbook observe` again" if gone else "no recorder runs"
    if "link_state" not in recorder:
        return "recorder starting"
    said = [recorder["fix_utc"] or "no fix time yet"]
    if recorder["epochs"]:
        said.append(recorder["quality_words"])
    for key, words in (("satellites", "{} satellites"), ("hdop", "HDOP {}"), ("age_s", "corrections {} s old")):
        if recorder[key] is not None:
            said.append(words.format(recorder[key]))
    said.append(f"{recorder['epochs']} epochs")
    said.append(_link(recorder))
    if recorder.get("backup_path"):
        said.append(_copy(recorder))
    return ", ".join(said)


def _copy(recorder: dict[str, Any]) -> str:
    age_s = recorder["backup_age_s"]
    how_old = "no copy yet" if age_s is None else f"copy {age_s:.0f} s old"
    return f"{how_old}: {recorder['backup_problem']}" if recorder["backup_problem"] else how_old


def _link(recorder: dict[str, Any]) -> str:
    silence_s = recorder["silence_s"]
    if recorder["link_state"] in ("lost", "stale"):
        since = "" if silence_s is None else f" {silence_s:.0f} s"
        return f"NO DATA{since} ({recorder['link_reason']})"
    if silence_s is not None and silence_s >= 5:
        return f"NO DATA {silence_s:.0f} s"
    return f"link {recorder['link_state']}"


def figures_line(status: dict[str, Any]) -> str:
    """The 95 % figures so far and the verdict of the leave check, or why there are none."""
    figures, problem = status["figures"], status["problem"]
    if figures is None:
        return f"no figures yet: {problem['text']}" if problem else "no figures yet"
    said = [f"95 %: {_metres(figures['horizontal95_m'])} horizontal, {_metres(figures['vertical95_m'])} vertical"]
    said.append(f"{figures['kept']} epochs kept")
    if figures["independent_epochs"] is not None:
        said.append(f"worth about {figures['independent_epochs']:.0f} independent ones")
    if figures["verdict"] is not None:
        said.append(figures["verdict"])
    return ", ".join(said)


def _metres(value: float | None) -> str:
    return "unknown" if value is None else f"{rounded_up(value, decimals_for(value, least=3))} m"
