"""One target in one process until its time is up: coverage guided with atheris, by mutation alone without it.

What fails is written down once per place in the program (`findings.json`, with the smallest input that did it), and
fuzzing goes on: one run finds them all. An execution that takes more than SLOW_S of this process's CPU time is a finding
too (four times as much where every branch is counted); what others do to the machine is not.
"""

from __future__ import annotations

import json
import random
import sys
import time
import traceback
from collections.abc import Callable
from pathlib import Path
from typing import Any

SLOW_S = 5.0
RSS_LIMIT_MB = 2048


class Notebook:
    """Executions counted, failures noted once each."""

    def __init__(self, run: Callable[[bytes], None], folder: Path, slow_s: float = SLOW_S) -> None:
        self.run, self.folder, self.slow_s = run, folder, slow_s
        self.executions, self.slowest_s = 0, 0.0
        self.findings: dict[str, dict[str, Any]] = {}
        self._written = 0.0

    def once(self, data: bytes) -> None:
        """Run one input."""
        start = time.process_time()
        try:
            self.run(data)
        except Exception as error:  # whatever got out is the finding
            self._note(error, data)
        took = time.process_time() - start
        self.executions += 1
        if took > self.slowest_s:
            self.slowest_s = took
            if took > self.slow_s:
                self._keep("slow", f"one execution took {took:.1f} s", data)
        if time.monotonic() > self._written + 1.0:
            self.write()

    def _note(self, error: Exception, data: bytes) -> None:
        frames = traceback.extract_tb(error.__traceback__)
        ours = [frame for frame in frames if "fieldbook" in Path(frame.filename).parts[:-1]] or frames
        place = f"{Path(ours[-1].filename).name}:{ours[-1].lineno}"
        self._keep(f"{type(error).__name__} at {place}", str(error)[:300], data)

    def _keep(self, name: str, text: str, data: bytes) -> None:
        found = self.findings.setdefault(name, {"text": text, "times": 0, "input": data.hex()})
        found["times"] += 1
        if len(data) < len(found["input"]) // 2:
            found.update(text=text, input=data.hex())
        if found["times"] == 1:
            self.write()

    def write(self) -> None:
        """Put the state where the driver reads it."""
        self._written = time.monotonic()
        state = {"executions": self.executions, "slowest_s": self.slowest_s, "findings": self.findings}
        part = self.folder / "findings.part"
        part.write_text(json.dumps(state))
        part.replace(self.folder / "findings.json")


def main(name: str, seconds: int, seed: int, folder: Path, *, guided: bool) -> int:
    """Fuzz one target; the process may end inside atheris."""
    if guided:
        import atheris

        with atheris.instrument_imports(include=["fieldbook", "pynmea2"]):
            from .targets import TARGETS
    else:
        from .targets import TARGETS
    from .mutations import mutate

    target = TARGETS[name]
    seeds = target.seeds()
    notebook = Notebook(target.run, folder, SLOW_S * 4 if guided else SLOW_S)
    if not guided:
        chance, until = random.Random(seed), time.monotonic() + seconds
        pool = list(seeds)
        while time.monotonic() < until:
            data = mutate(chance.choice(pool), chance, target.words, pool, target.most_bytes)
            notebook.once(data)
            if chance.random() < 0.002:  # drift: mutations of mutations
                pool[len(seeds) :] = [*pool[len(seeds) :][-200:], data]
        notebook.write()
        return 0
    corpus = folder / "corpus"
    corpus.mkdir(exist_ok=True)
    for number, data in enumerate(seeds):
        (corpus / f"seed-{number:03d}").write_bytes(data)

    def change(data: bytes, most: int, salt: int) -> bytes:
        chance = random.Random(salt)
        if chance.random() < 0.5:
            return bytes(atheris.Mutate(data, most))
        return mutate(data, chance, target.words, seeds, most)

    options = [f"-max_total_time={seconds}", f"-max_len={max(target.most_bytes, *map(len, seeds))}", f"-seed={seed}"]
    limits = [f"-rss_limit_mb={RSS_LIMIT_MB}", "-timeout=120", "-print_final_stats=1", f"-artifact_prefix={folder}/"]
    atheris.Setup([sys.argv[0], str(corpus), *options, *limits], notebook.once, custom_mutator=change)
    atheris.Fuzz()
    return 0
