"""Frames, grid and geoid of a session, refused before the first byte is recorded rather than weeks later.

The recorder itself never loads PROJ; whoever begins an occupation (command or screen) calls this first.
"""

from __future__ import annotations

from pathlib import Path

from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.session import Session


def check_session_frames(session: Session, beside: Path | None = None) -> None:
    """Is this choice of frames, epochs, grid and geoid one that can be used at all?

    Args:
        beside: folder of the session file, where a geoid model may lie. One that is not there yet may come later.

    Raises:
        UsageError: refused by kind, an epoch missing, a grid or a geoid model that does not belong to the client's frame.
    """
    from fieldbook.reduce import frames

    frames.check_frames(session.frame)
    if session.frame.grid is not None:
        frames.check_grid(session.frame.client, session.frame.grid)
    if session.frame.geoid is not None and beside is not None:
        _check_geoid(session.frame.geoid, session.frame.client, beside)


def _check_geoid(name: str, client: str, beside: Path) -> None:
    from fieldbook.reduce.geoid import read_record, require_frame
    from fieldbook.settings.grids import files_named, grid_folders

    for path in files_named(name, grid_folders(beside))[:1]:
        try:
            record = read_record(path.with_suffix(".toml"))
        except ReductionError:
            return  # the reduction says what is wrong with it; it can be put right until then
        try:
            require_frame(record, client)
        except ReductionError as problem:
            raise UsageError(problem.text, problem.remedy, code=problem.code) from None
