"""All targets by name."""

from __future__ import annotations

from . import book_targets, file_targets, receiver_targets, signing_targets, text_targets
from .target import Target

TARGETS: dict[str, Target] = {
    one.name: one
    for part in (receiver_targets, text_targets, book_targets, file_targets, signing_targets)
    for one in part.TARGETS
}
