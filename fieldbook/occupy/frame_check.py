"""Frames, grid and geoid of a session, refused before the first byte is recorded rather than weeks later.

The recorder itself never loads PROJ; whoever begins an occupation (command or screen) calls this first.
"""

from __future__ import annotations

from fieldbook.model.session import Session


def check_session_frames(session: Session) -> None:
    """Is this choice of frames, epochs and grid one that can be used at all?

    Raises:
        UsageError: refused by kind, an epoch missing, a grid that does not belong to the client's frame.
    """
    from fieldbook.reduce import frames

    frames.check_frames(session.frame)
    if session.frame.grid is not None:
        frames.check_grid(session.frame.client, session.frame.grid)
