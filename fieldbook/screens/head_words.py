"""What is wrong with a recording at this moment, by code and in words; the worst first."""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.model.live import LiveView
from fieldbook.screens.words import duration, quality_word

SILENT_AFTER_S = 5.0  # seconds without a byte after which the head line says NO DATA


@dataclass(frozen=True)
class Wrong:
    """One thing that is so now. recorded: the recorder enters it itself. at_once: told without waiting."""

    code: str
    text: str
    recorded: bool = False
    at_once: bool = False


def wrong_now(view: LiveView | None) -> list[Wrong]:
    """Everything that is wrong with the open occupation's recording."""
    if view is None or view.occupation is None or not view.occupation.open:
        return []
    if not view.recorder_alive:
        return [Wrong("recorder_gone", "RECORDER GONE", at_once=True)]
    return [*_link(view), *_recorder(view), *_fix(view)]


def _link(view: LiveView) -> list[Wrong]:
    silence, recorder = view.silence_s, view.recorder
    if recorder is not None and recorder.link_state == "lost":
        return [
            Wrong("link_lost", "LINK LOST" + (f" {duration(silence)}" if silence is not None else ""), at_once=True)
        ]
    if silence is not None and silence > SILENT_AFTER_S:
        return [Wrong("no_data", f"NO DATA {duration(silence)}", at_once=True)]
    return []


def _recorder(view: LiveView) -> list[Wrong]:
    alarms = view.recorder.alarms if view.recorder is not None else []
    return [Wrong(code, code.replace("_", " ").upper(), recorded=True, at_once=True) for code in alarms]


def _fix(view: LiveView) -> list[Wrong]:
    recorder = view.recorder
    if recorder is None or _link(view):
        return []  # the last words of a silent receiver say nothing of now
    wanted = view.occupation.session.requirement if view.occupation else None
    found = []
    if wanted is not None and recorder.quality is not None and recorder.quality not in wanted.accept_quality:
        found.append(Wrong("fix_lost", f"NOT ACCEPTED: {quality_word(recorder.quality)}"))
    limit = wanted.max_correction_age_s if wanted is not None else None
    if limit is not None and recorder.age_s is not None and recorder.age_s > limit:
        found.append(Wrong("correction_age", f"CORRECTIONS {duration(recorder.age_s)} OLD"))
    return found
