"""`python -m tests.fuzz --minutes 30 [--target NAME ...] [--jobs N]`: drive the fuzz targets and say what was found.

Coverage guided where the package `atheris` is installed (`pip install atheris`; it is no dependency), else by mutation
alone, which the output calls 'not coverage guided'. The time is shared evenly between the targets. Exit code 1 if
anything was found. `--keep FOLDER` keeps the corpora and the inputs that fail, and goes on from there next time.
"""

from __future__ import annotations

import argparse
import importlib.util
import json
import subprocess
import sys
import tempfile
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

ROOT = Path(__file__).parents[2]


def _arguments() -> argparse.Namespace:
    parser = argparse.ArgumentParser(prog="python -m tests.fuzz", description=__doc__)
    parser.add_argument("--minutes", type=float, default=30.0, help="wall-clock time for all targets together")
    parser.add_argument("--target", action="append", help="only this one (may be repeated)")
    parser.add_argument("--jobs", type=int, default=1, help="processes at a time")
    parser.add_argument("--seed", type=int, default=None, help="of the mutations; the time of day if left out")
    parser.add_argument("--keep", type=Path, help="folder for corpora and findings")
    parser.add_argument("--unguided", action="store_true", help="without coverage, even where atheris is installed")
    parser.add_argument("--worker", nargs=3, metavar=("NAME", "SECONDS", "FOLDER"), help=argparse.SUPPRESS)
    return parser.parse_args()


def _drive(name: str, seconds: int, seed: int, folder: Path, *, guided: bool) -> dict[str, Any]:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "findings.json").unlink(missing_ok=True)
    command = [sys.executable, "-W", "ignore", "-m", "tests.fuzz", "--seed", str(seed)]
    command += ["--worker", name, str(seconds), str(folder), *([] if guided else ["--unguided"])]
    with (folder / "log.txt").open("wb") as log:
        done = subprocess.run(command, cwd=ROOT, stdout=log, stderr=log, check=False)
    path = folder / "findings.json"
    state: dict[str, Any] = (
        json.loads(path.read_text()) if path.exists() else {"executions": 0, "slowest_s": 0.0, "findings": {}}
    )
    text = (folder / "log.txt").read_text(errors="replace")
    for line in text.splitlines():
        if line.startswith("stat::number_of_executed_units:"):
            state["executions"] = max(state["executions"], int(line.split()[1]))
    if done.returncode:
        state["findings"][f"the process ended with {done.returncode}"] = {"text": text[-600:], "times": 1, "input": ""}
    for number, found in enumerate(state["findings"].values()):
        (folder / f"failing-{number:02d}").write_bytes(bytes.fromhex(found["input"]))
    print(
        f"{name:15} {state['executions']:>10,} executions in {seconds} s, slowest {state['slowest_s']:.2f} s,", end=" "
    )
    print(f"{len(state['findings'])} found", flush=True)
    for place, found in state["findings"].items():
        print(f"    {place}, {found['times']} times: {found['text'][:200]!r}\n      {found['input'][:400]}", flush=True)
    return state


def main() -> int:
    """Run; 1 if anything was found."""
    asked = _arguments()
    guided = importlib.util.find_spec("atheris") is not None and not asked.unguided
    seed = asked.seed if asked.seed is not None else int(time.time()) % 2**31
    if asked.worker:
        from .worker import main as work

        name, seconds, folder = asked.worker
        return work(name, int(seconds), seed, Path(folder), guided=guided)
    from .targets import TARGETS

    names = asked.target or list(TARGETS)
    if unknown := [name for name in names if name not in TARGETS]:
        print(f"No target {unknown[0]}. There are: {', '.join(TARGETS)}.")
        return 2
    seconds = max(1, int(asked.minutes * 60 * asked.jobs / len(names)))
    how = "coverage guided (atheris)" if guided else "not coverage guided"
    print(f"{len(names)} targets, {seconds} s each, {asked.jobs} at a time, seed {seed}, {how}", flush=True)
    with tempfile.TemporaryDirectory(prefix="fieldbook-fuzz-") as scratch, ThreadPoolExecutor(asked.jobs) as pool:
        base = asked.keep or Path(scratch)
        states = list(pool.map(lambda name: _drive(name, seconds, seed, base / name, guided=guided), names))
    total, found = sum(one["executions"] for one in states), sum(len(one["findings"]) for one in states)
    print(f"{total:,} executions, {found} found")
    return 1 if found else 0


if __name__ == "__main__":
    sys.exit(main())
