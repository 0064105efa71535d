"""`python tests/benchmarks`: every benchmark of this folder, one after the other, each ratio beside its goal."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

HERE = Path(__file__).parent
NOT_BENCHMARKS = {"__main__", "receiver_log", "conftest"}


def main() -> int:
    """Run them all; returns how many failed to run (a goal missed is printed, not a failure)."""
    root = str(HERE.parents[1])
    before = os.environ.get("PYTHONPATH")
    environment = {**os.environ, "PYTHONPATH": root if not before else os.pathsep.join((root, before))}
    failed = 0
    for path in sorted(HERE.glob("*.py")):
        if path.stem in NOT_BENCHMARKS or path.stem.startswith(("_", "coverage_", "faults_")):  # parts of others
            continue
        print(f"-- {path.stem}", flush=True)
        failed += subprocess.run([sys.executable, str(path)], check=False, env=environment).returncode != 0
    return failed


if __name__ == "__main__":
    sys.exit(main())
