"""Grid files are meant by hash: what is recorded holds, a decision adds another, the first certificate names them."""

from __future__ import annotations

from types import SimpleNamespace

import pytest

from fieldbook.errors import ReductionError
from fieldbook.model.reduction import GridFile, Operation
from fieldbook.reduce.gridhashes import meant_geoid, require_same_grids

A, B, C = "a" * 64, "b" * 64, "c" * 64


def occupation(*, frozen: str | None = None, recorded: dict[str, str] | None = None, accepted: tuple[str, ...] = ()):
    frame = SimpleNamespace(geoid="model.gtx", geoid_sha256=frozen)
    return SimpleNamespace(
        session=SimpleNamespace(frame=frame), grid_hashes=recorded or {}, accepted_grid_files=list(accepted)
    )


def operation(sha256: str) -> Operation:
    return Operation("made up", [], None, True, [GridFile("shift.gsb", sha256)])


def test_which_geoid_file_is_meant() -> None:
    assert meant_geoid(occupation()) is None, "none named yet: the first certificate will"
    frozen = meant_geoid(occupation(frozen=A, recorded={"model.gtx": B}))
    assert frozen is not None
    assert (frozen.sha256, frozen.accepted) == (A, (A,))
    recorded = meant_geoid(occupation(recorded={"model.gtx": B}, accepted=(C,)))
    assert recorded is not None
    assert (recorded.sha256, recorded.accepted) == (B, (C, B))


def test_grids_of_the_operation() -> None:
    require_same_grids(occupation(), operation(A))
    require_same_grids(occupation(recorded={"shift.gsb": A}), operation(A))
    require_same_grids(occupation(recorded={"shift.gsb": A}, accepted=(B,)), operation(B))
    with pytest.raises(ReductionError) as caught:
        require_same_grids(occupation(recorded={"shift.gsb": A}), operation(B))
    assert caught.value.code == "grid_other"
    assert f"grid_file={B}" in caught.value.remedy
