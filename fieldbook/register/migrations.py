"""The tables of a register file, as an append-only list of migrations.

Two tables hold everything: `entry`, chained like the entries of a book, and `content`, the evidence that entries name by
its SHA-256. There is no table that is changed: what holds today is folded from the entries. A change of the tables is a
new migration at the end; `user_version` is the number of migrations a file has seen, and the entries `register` and
`migrated` say which program applied them and when.
"""

from __future__ import annotations

APPLICATION_ID = 0x46425231  # "FBR1"


def _never(table: str) -> tuple[str, ...]:
    """Triggers that refuse every change and every removal of a row."""
    return tuple(
        f"CREATE TRIGGER {table}_no_{event.lower()} BEFORE {event} ON {table} BEGIN"
        f" SELECT RAISE(ABORT, '{table}: nothing is ever changed or erased'); END"
        for event in ("UPDATE", "DELETE")
    )


M001_REGISTER: tuple[str, ...] = (
    """CREATE TABLE entry (
  seq INTEGER PRIMARY KEY,
  utc TEXT NOT NULL,
  kind TEXT NOT NULL,
  body TEXT NOT NULL,
  by TEXT NOT NULL,
  previous_hash TEXT NOT NULL,
  hash TEXT NOT NULL
) STRICT""",
    *_never("entry"),
    "CREATE TRIGGER entry_in_order BEFORE INSERT ON entry"
    " WHEN NEW.seq IS NOT (SELECT coalesce(max(seq), 0) + 1 FROM entry) BEGIN"
    " SELECT RAISE(ABORT, 'entry: entries follow each other without a gap'); END",
    "CREATE TRIGGER entry_chained BEFORE INSERT ON entry"
    " WHEN NEW.seq > 1 AND NEW.previous_hash IS NOT (SELECT hash FROM entry WHERE seq = NEW.seq - 1) BEGIN"
    " SELECT RAISE(ABORT, 'entry: an entry carries the hash of the one before'); END",
    """CREATE TABLE content (
  sha256 TEXT PRIMARY KEY,
  bytes INTEGER NOT NULL,
  codec TEXT NOT NULL,
  data BLOB NOT NULL
) STRICT""",
    *_never("content"),
    "CREATE TRIGGER content_no_replace BEFORE INSERT ON content"
    " WHEN EXISTS (SELECT 1 FROM content WHERE sha256 = NEW.sha256) BEGIN"
    " SELECT RAISE(ABORT, 'content: this is there already'); END",
)

# Append only. The name of a migration is recorded in every register.
MIGRATIONS: list[tuple[str, tuple[str, ...]]] = [("m001_register", M001_REGISTER)]


def version() -> int:
    """The number of migrations this program knows."""
    return len(MIGRATIONS)


def statements(first: int, last: int | None = None) -> list[str]:
    """The statements of migrations number `first` + 1 to `last`, in order."""
    return [text for _, texts in MIGRATIONS[first:last] for text in texts]
