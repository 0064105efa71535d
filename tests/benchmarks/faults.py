"""Faults, injected for real: `python tests/benchmarks/faults.py [--long] [--only WORD]`. One markdown table.

Real recorders (`fieldbook observe`) write real books while they are killed, starved, unplugged and stopped. A row counts
what had been acknowledged to another process before the fault, and what of it is missing or different afterwards.

    faults_rig.py     wire, recorders, witness           faults_kills.py    kill -9, a file in pieces
    faults_power.py   power cut: writes replayed         faults_media.py    disk full, read-only, copies, versions
    faults_links.py   ports, noise, silence, suspension  faults_clock.py    the host's clock, two recorders
    faults_lock.py    the lost POSIX lock
    faults_rescue.py  damaged books, rescued

The short form takes less than three minutes; `--long` kills 200 recorders and cuts the power 500 times. POSIX only;
what a machine cannot do (root, a C compiler) is a row 'not run'. Exit 1 if anything was lost, damaged or not as promised.
"""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Callable

from faults_clock import clock_wrong, long_silence, race, second_recorder, woken_up
from faults_kills import file_in_pieces, recorder_kills, screen_kills
from faults_links import noise, replaced, silence, suspended, tcp_dropped, unplugged
from faults_lock import lost_lock
from faults_media import copied_without_wal, disk_full, disk_low, newer_version, older_version, read_only
from faults_power import power_cuts
from faults_rescue import rescued
from faults_rig import Row

HEAD = ["fault", "times", "epochs acknowledged", "lost", "books damaged", "time to recover", "remark"]


def faults(*, long: bool) -> dict[str, Callable[[], Row]]:
    """Every fault, with how often it is tried."""

    def often(short: int, many: int) -> int:
        return many if long else short

    return {
        "recorder_kills": lambda: recorder_kills(often(10, 200)),
        "screen_kills": lambda: screen_kills(often(4, 40)),
        "file_in_pieces": lambda: file_in_pieces(2.0),
        "power_cuts": lambda: power_cuts(often(40, 500), seconds=often(8, 60)),
        "disk_full": lambda: disk_full(often(2, 9)),
        "disk_low": lambda: disk_low(often(1, 5)),
        "read_only": lambda: read_only(often(1, 5)),
        "unplugged": lambda: unplugged(often(3, 20)),
        "replaced": lambda: replaced(often(2, 10)),
        "tcp_dropped": lambda: tcp_dropped(often(2, 20)),
        "noise": lambda: noise(often(1, 5)),
        "silence": lambda: silence(1, seconds=often(7, 1800)),
        "long_silence": lambda: long_silence(1),
        "suspended": lambda: suspended(often(2, 20)),
        "woken_up": lambda: woken_up(often(2, 12)),
        "clock_wrong": clock_wrong,
        "lost_lock": lambda: lost_lock(often(1, 10)),
        "second_recorder": lambda: second_recorder(often(2, 10)),
        "race": lambda: race(often(1, 10)),
        "copied_without_wal": lambda: copied_without_wal(often(3, 30)),
        "older_version": lambda: older_version(often(1, 10)),
        "rescued": lambda: rescued(often(18, 300)),
        "newer_version": lambda: newer_version(1),
    }


def main() -> int:
    """Run, print, and say whether all of it held."""
    parser = argparse.ArgumentParser(description="Injects faults into real recorders and counts what is lost.")
    parser.add_argument("--long", action="store_true", help="200 kills, 500 power cuts, 30 minutes of silence")
    parser.add_argument(
        "--only", action="append", choices=list(faults(long=False)), help="only this fault; may be repeated"
    )
    given = parser.parse_args()
    if sys.platform == "win32":
        print("not run: pseudo-terminals and signals are missing")
        return 0
    began, rows = time.monotonic(), []
    for name, fault in faults(long=given.long).items():
        if given.only and name not in given.only:
            continue
        print(f"{name} ...", end="", file=sys.stderr, flush=True)
        since = time.monotonic()
        try:
            row = fault()
        except Exception as error:  # the table is printed whatever happens to one line of it
            row = Row(name, failed=[f"stopped: {type(error).__name__}: {error}"], times=1)
        rows.append(row)
        print(f" {time.monotonic() - since:.0f} s {'; '.join(row.failed)}", file=sys.stderr, flush=True)
    print("| " + " | ".join(HEAD) + " |\n|" + "---|" * len(HEAD))
    for row in rows:
        print("| " + " | ".join(cell.replace("|", "/") for cell in row.cells()) + " |")
    bad = sum(bool(row.lost or row.damaged or row.failed) for row in rows)
    print(f"\n{len(rows)} faults in {time.monotonic() - began:.0f} s; {bad} of them not as promised.")
    return 1 if bad else 0


if __name__ == "__main__":
    sys.exit(main())
