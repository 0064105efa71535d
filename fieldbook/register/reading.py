"""Evidence of many occupations at once, each piece checked against its hash."""

from __future__ import annotations

import json
from collections.abc import Sequence

from fieldbook.errors import BookError

from .evidence import Evidence, evidence_from_tree
from .fold import Held
from .store import Register


def evidence_by_key(register: Register, wanted: Sequence[Held]) -> dict[tuple[str, int], Evidence]:
    """Evidence by book and occupation.

    Raises:
        BookError: missing, damaged, or of a schema this program does not know.
    """
    trees: dict[str, Evidence] = {}
    for sha256, data in register.given(dict.fromkeys(held.evidence for held in wanted)):
        try:
            trees[sha256] = evidence_from_tree(json.loads(data))
        except (ValueError, TypeError, LookupError, AttributeError) as error:
            raise BookError(
                f"The evidence {sha256[:12]}… of the register {register.path} is none that this program reads.",
                "Install the version that wrote it, or a later one.",
                code="newer",
            ) from error
    return {held.key: trees[held.evidence] for held in wanted}
