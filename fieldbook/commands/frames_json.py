"""Frames, pairs and answers as JSON trees."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from fieldbook.occupy.frame_words import kind_of
from fieldbook.reduce.frames import Answer, FrameInfo, Pair, operation_codes


def frame_tree(info: FrameInfo) -> dict[str, Any]:
    """A frame for JSON."""
    west, south, east, north = info.bounds or (None, None, None, None)
    return {
        "code": info.code,
        "name": info.name,
        "kind": kind_of(info),
        "area": info.area_name,
        "bounds_deg": {"west": west, "south": south, "east": east, "north": north},
    }


def pair_tree(pair: Pair) -> dict[str, Any]:
    """A pair for JSON."""
    operation, refused = pair.operation, pair.refused
    return {
        "receiver": frame_tree(pair.receiver),
        "client": frame_tree(pair.client),
        "epoch": pair.epoch,
        "operation": None
        if operation is None
        else {
            "name": operation.name,
            "steps": [
                {"code": code, "name": step.name, "accuracy_m": step.accuracy_m}
                for code, step in zip(operation_codes(operation), operation.steps, strict=True)
            ],
            "accuracy_m": operation.accuracy_m,
            "coordinate_epoch": operation.coordinate_epoch,
            "grids": [{"name": grid.name, "sha256": grid.sha256} for grid in operation.grids],
        },
        "refused": None if refused is None else {"code": refused.code, "text": refused.text, "remedy": refused.remedy},
        "effect_enu_mm": None if pair.effect_mm is None else list(pair.effect_mm),
        "change_enu_mm_per_year": None if pair.change_mm is None else list(pair.change_mm),
        "missing_grids": list(pair.missing_grids),
        "considered": [
            {
                "steps": list(item.codes),
                "accuracy_m": item.accuracy_m,
                "used": item.used,
                "refused": item.reason or None,
                "missing_grids": list(item.missing),
            }
            for item in pair.considered
        ],
        "warnings": list(pair.warnings),
    }


def answer_tree(item: Answer, listed: Sequence[FrameInfo]) -> dict[str, Any]:
    """An answer for JSON."""
    return {
        "kind": item.kind,
        "words": item.words,
        "means": item.means,
        "ask": list(item.ask),
        "write": list(item.write),
        "plausible": [frame_tree(info) for info in listed],
        "beware": item.beware,
    }
