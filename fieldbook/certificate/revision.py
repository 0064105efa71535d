"""What a new revision of a certificate changes against the one it replaces, in words and in millimetres."""

from __future__ import annotations

from fieldbook.certificate.identity import changed_parts, comparable
from fieldbook.certificate.repeats import difference_enu_m
from fieldbook.certificate.words import PART_WORDS
from fieldbook.model.canonical import Tree
from fieldbook.model.reduction import Geodetic
from fieldbook.model.rounding import rounded


def changes(before: Tree, now: Tree) -> list[str]:
    """One text per changed part, that of the coordinates with its size; new less old."""
    parts = [part for part in sorted(comparable(now)) if changed_parts(before.get(part), now[part])]
    texts = [PART_WORDS[part] for part in PART_WORDS if part in parts]
    if "position" in parts:
        texts[texts.index(PART_WORDS["position"])] = _moved(before, now)
    return texts or ["other statements"]


def _moved(before: Tree, now: Tree) -> str:
    old, new = before["position"]["client"], now["position"]["client"]
    word = PART_WORDS["position"]
    if old is None or new is None or (old["frame"], old["epoch"]) != (new["frame"], new["epoch"]):
        return f"{word} (in another frame or epoch)"
    east, north, up = difference_enu_m(_place(old), _place(new))
    vertical = "" if up is None else f", {rounded(up * 1000, 1)} mm up"
    return f"{word} (by {rounded(east * 1000, 1)} mm east, {rounded(north * 1000, 1)} mm north{vertical})"


def _place(facts: Tree) -> Geodetic:
    height = facts["h_m"]
    return Geodetic(
        facts["frame"],
        facts["frame_name"],
        None,
        float(facts["lat_deg"]),
        float(facts["lon_deg"]),
        None if height is None else float(height),
    )
