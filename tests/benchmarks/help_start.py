"""`fieldbook --help` against `python -c "import click"`: medians of alternating runs. Goal: at most 2 x."""

from __future__ import annotations

import statistics
import subprocess
import sys
import time

RUNS = 15
GOAL = 2.0


def seconds(arguments: list[str]) -> float:
    """Wall time of one run of the interpreter."""
    began = time.perf_counter()
    subprocess.run([sys.executable, *arguments], check=True, capture_output=True)
    return time.perf_counter() - began


def main() -> None:
    """Print the ratio beside its goal."""
    ours, bare = ["-m", "fieldbook", "--help"], ["-c", "import click"]
    seconds(ours), seconds(bare)
    pairs = [(seconds(ours), seconds(bare)) for _ in range(RUNS)]
    help_s = statistics.median(pair[0] for pair in pairs)
    click_s = statistics.median(pair[1] for pair in pairs)
    print(
        f"fieldbook --help {1000 * help_s:.0f} ms, import click {1000 * click_s:.0f} ms:"
        f" {help_s / click_s:.2f} x (goal {GOAL:.1f} x)"
    )


if __name__ == "__main__":
    main()
