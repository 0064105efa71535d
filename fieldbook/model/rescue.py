"""What a rescue says it did: `fieldbook rescue --json` field for field."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass, field

from fieldbook.model.canonical import Tree


@dataclass(frozen=True)
class LostItems:
    """Consecutive received items that are missing; times by the receiver's fixes on both sides, else by arrival."""

    first_id: int
    last_id: int
    bytes: int | None  # of their data; None: not known
    from_utc: str | None
    to_utc: str | None


@dataclass
class RescuedOccupation:
    """One occupation in the new book."""

    occupation: int
    mark: str | None  # None: its `occupation` entry is lost
    whole: bool  # nothing missing, everything proven
    ended_by: str | None
    received_bytes: int  # salvaged
    proven_bytes: int  # by a hash in the old chain
    own_hash_bytes: int  # by the hash in their own row only
    unsealed_bytes: int  # last rows, which had no hash yet
    unproven_bytes: int  # out of damaged pieces
    stated_bytes: int | None  # what the old book says was received, where that is known
    cut_bytes: int  # unproven lines whose checksum fails, left out
    mended_chunks: list[int]  # one flipped bit put right, proven by the hash
    lost: list[LostItems] = field(default_factory=list)
    epochs: int = 0
    severity: str | None = None  # of the finding `rescued` it carries
    finding: str = ""
    file: str | None = None  # where the bytes were written, if the occupation could not be carried
    file_sha256: str | None = None


@dataclass
class RescueReport:
    """The whole of it."""

    book: str
    new: str | None
    outcome: str  # "copy": nothing was damaged; "repaired": only what can be made again; "rescued"
    old_id: str | None = None
    old_head_seq: int | None = None
    old_head_hash: str | None = None
    old_bytes: int = 0
    old_sha256: str = ""
    old_wal_sha256: str | None = None
    new_id: str | None = None
    problems: list[str] = field(default_factory=list)  # what was wrong with the old book
    end_known: bool = True  # whether the last entries of the old book are surely the last
    entries_carried: int = 0
    entries_mended: list[int] = field(default_factory=list)
    entries_lost: list[list[int]] = field(default_factory=list)  # [first, last]
    entries_damaged: list[list[int]] = field(default_factory=list)
    occupations: list[RescuedOccupation] = field(default_factory=list)
    certificates: list[str] = field(default_factory=list)  # numbers that do not stand in the new book
    holds: bool = True  # the new book, verified

    def to_json(self) -> Tree:
        """The tree of `--json`."""
        return {"schema": "fieldbook.rescue/1", **dataclasses.asdict(self)}
