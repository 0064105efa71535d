"""The state of a job as folded from the entries of its book: there is no second truth.

`book.fold` builds these; everything above reads them. Struck entries have already been taken out, and are
listed in `struck`.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date

from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry
from fieldbook.model.session import HeightReading, Session


@dataclass
class Occupation:
    """One occupation: what its entries say."""

    number: int
    mark: str
    session: Session  # `setup` entries already applied; `session.setup.heights` is EMPTY here: see `heights`
    entry_seq: int
    started_utc: str  # time of the `occupation` entry
    observer: str
    link: str
    simulated: bool
    heights: list[HeightReading] = field(default_factory=list)  # session's and later ones, struck ones gone
    ended_by: str | None = None  # "end of file", "time limit", "operator"; None = open
    ended_utc: str | None = None
    origin_e8min: tuple[int, int] | None = None  # latitude, longitude of the offsets in the epoch table
    day0: date | None = None  # as decoded from the receiver, or as decided
    day0_source: str | None = None  # "RMC", "ZDA", "decision"
    rollover_weeks: int = 0  # decision: weeks to add to day0
    datum_confirmed: str | None = None  # session or decision
    talker: str | None = None  # session or decision
    initialisation_decisions: dict[int, tuple[bool, str]] = field(default_factory=dict)  # number -> (used, reason)
    operation: list[str] | None = None  # recorded codes of the frame operation, e.g. ["EPSG:9991 inverse", "EPSG:8049"]
    grid_hashes: dict[str, str] = field(default_factory=dict)  # file name -> SHA-256 of what was used when certified
    accepted_grid_files: list[str] = field(default_factory=list)  # SHA-256 of files a decision takes instead
    accuracy_over_limit: bool = False
    outside_area_accepted: bool = False
    outside_hull_accepted: bool = False  # of the marks that made a local grid
    decisions: list[Entry] = field(default_factory=list)
    remarks: list[Entry] = field(default_factory=list)
    gaps: list[Entry] = field(default_factory=list)  # `gap` and `resumed` entries
    findings: list[Entry] = field(default_factory=list)  # findings the recorder made while recording (overlap ...)
    struck: list[Entry] = field(default_factory=list)  # entries of this occupation that were struck out
    received_sha256: str | None = None  # of the received bytes alone, from the `end` entry
    received_bytes: int | None = None

    @property
    def open(self) -> bool:
        """Still being recorded, or left open by a crash."""
        return self.ended_by is None


@dataclass
class BookState:
    """The whole book, folded."""

    id: str  # UUID4
    head_seq: int
    head_hash: str
    created_utc: str
    session: Session | None  # of the `session` entry written by `new`, if any: what the screen offers
    occupations: dict[int, Occupation] = field(default_factory=dict)
    marks: dict[str, Tree] = field(default_factory=dict)  # name -> latest tree of [mark]
    remarks: list[Entry] = field(default_factory=list)  # remarks that belong to no occupation
    documents: list[Entry] = field(default_factory=list)  # `certificate` and `draft` entries, in order
    rendered: list[Entry] = field(default_factory=list)  # `rendered` entries: hash of every file written
    local_grids: dict[str, Entry] = field(default_factory=dict)  # name -> latest `local_grid` entry
    strikes: dict[int, Entry] = field(default_factory=dict)  # struck seq -> the strike
    rescued: Entry | None = None  # what this book was salvaged from, and what is missing

    @property
    def open_occupation(self) -> Occupation | None:
        """The occupation that is not ended, if any (at most one)."""
        return next((item for item in self.occupations.values() if item.open), None)

    def of_mark(self, name: str) -> list[Occupation]:
        """Occupations of a mark, in order."""
        return [item for item in self.occupations.values() if item.mark == name]
