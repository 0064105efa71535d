"""One flipped bit: `python tests/benchmarks/bitflips.py [--long] [--book NAME]`. One markdown table, counts of both outcomes.

Five sound books (`tests/attack/victims.py`). In each, bits are flipped one at a time at random places of the file, and at
random places of every table's content; of the killed one in its -wal. `fieldbook verify` finds it, or everything the book
says is compared with the untouched book: entries, folded state, received items, epochs, all of `reduce --json`, and the facts
that a certificate would state. What is neither found nor without effect is a hole, is listed, and makes the command fail.
`--long`: 1,000 places of each file and 1,000 of every table, shared by the books that have rows in it; else 60 and 100.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
import time
from collections import Counter
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[2]))

from tests.attack.bits import FOUND, HOLE, WITHOUT_EFFECT, Victim, flips
from tests.attack.page_map import CONTENT
from tests.attack.victims import NAMES, made

HEAD = ["book", "where", "flips", "found by verify", "without effect", "neither"]


def main() -> int:
    """Flip, count, print."""
    parser = argparse.ArgumentParser(description="Flips single bits of books and counts what verify finds.")
    parser.add_argument("--long", action="store_true", help="1,000 places of each file and of every table")
    parser.add_argument("--book", action="append", choices=NAMES, help="only this book; may be repeated")
    given = parser.parse_args()
    anywhere, of_each_table = (1000, 1000) if given.long else (60, 100)
    began, holes, total = time.monotonic(), [], Counter()
    print("| " + " | ".join(HEAD) + " |\n|" + "---|" * len(HEAD))
    with tempfile.TemporaryDirectory(prefix="bitflips-") as folder:
        names = given.book or NAMES
        books = {name: made(name, Path(folder) / name) for name in names}
        victims = {name: Victim(book, Path(folder) / f"attack-{name}.book") for name, book in books.items()}
        holding = Counter(region.owner for one in victims.values() for region in one.places if region.kind == CONTENT)
        each = {owner: -(-of_each_table // count) for owner, count in holding.items()}
        for name, victim in victims.items():
            result = flips(victim, anywhere=anywhere, each_table=each, seed=20270304)
            holes += [f"{name}: {one}" for one in result.holes]
            for owner, kind in sorted({(region.owner, region.kind) for region, _ in result.counts}):
                row = [
                    sum(times for (region, said), times in result.counts.items()
                        if (region.owner, region.kind, said) == (owner, kind, outcome))
                    for outcome in (FOUND, WITHOUT_EFFECT, HOLE)
                ]  # fmt: skip
                total.update(dict(zip((FOUND, WITHOUT_EFFECT, HOLE), row, strict=True)))
                print(
                    f"| {name} | {owner} {kind} | {sum(row):,} | " + " | ".join(f"{one:,}" for one in row) + " |",
                    flush=True,
                )
    counts = [total[FOUND], total[WITHOUT_EFFECT], total[HOLE]]
    print(f"| all | | {sum(counts):,} | " + " | ".join(f"{one:,}" for one in counts) + " |")
    print(f"\n{sum(counts):,} flips in {time.monotonic() - began:.0f} s")
    for hole in holes:
        print(f"HOLE {hole}")
    return 1 if holes else 0


if __name__ == "__main__":
    sys.exit(main())
