"""A book names its grid files by hash; another file of the same name is refused until a decision takes it.

Which file is meant: the one whose hash was frozen when the session file was read (`frame.geoid_sha256`), else the one an
`operation` entry keeps from the first certificate. A decision `grid_file` adds the hash of another one.
"""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.errors import ReductionError
from fieldbook.model.reduction import Operation
from fieldbook.model.state import Occupation


@dataclass(frozen=True)
class MeantFile:
    """SHA-256 of the file the book names, and of those that will do: itself and what decisions added."""

    sha256: str
    accepted: tuple[str, ...]


def meant_geoid(occupation: Occupation) -> MeantFile | None:
    """The geoid file this occupation means; None where none was named yet."""
    frame = occupation.session.frame
    sha256 = frame.geoid_sha256 or occupation.grid_hashes.get(frame.geoid or "")
    return None if sha256 is None else MeantFile(sha256, (*occupation.accepted_grid_files[::-1], sha256))


def require_same_grids(occupation: Occupation, operation: Operation) -> None:
    """Refuse grids of the frame operation that are not those of the book.

    Raises:
        ReductionError: another file of the same name is installed.
    """
    for grid in operation.grids:
        sha256 = occupation.grid_hashes.get(grid.name)
        if sha256 is not None and grid.sha256 not in (sha256, *occupation.accepted_grid_files):
            raise other_file(grid.name, MeantFile(sha256, (sha256,)), grid.sha256)


def other_file(name: str, meant: MeantFile, found_sha256: str) -> ReductionError:
    """The refusal, with both hashes and the decision that would take the file."""
    return ReductionError(
        f"The grid file {name} is not the one this book names: SHA-256 {found_sha256[:16]}... is there, "
        f"{meant.sha256[:16]}... is meant.",
        "Put the file meant back, or take this one by a decision: "
        f"`fieldbook entry BOOK decision --set grid_file={found_sha256} --set reason=...`.",
        code="grid_other",
    )
