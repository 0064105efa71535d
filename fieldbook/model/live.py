"""One frozen picture of a book being recorded: everything a screen, `status` or `watch` may show."""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.model.recorder import RecorderState
from fieldbook.model.reduction import Convergence, Reduction, Trace
from fieldbook.model.state import BookState, Occupation


@dataclass(frozen=True)
class LiveView:
    """Made by `occupy.live.LiveReader.snapshot()`; never changed afterwards."""

    state: BookState
    occupation: Occupation | None  # the open one, else the latest one, else None
    recorder: RecorderState | None  # last words of the recorder, if any
    recorder_alive: bool  # the lock is held
    silence_s: float | None  # since the last byte, by the host's clock
    elapsed_s: float | None  # since the first heard epoch of this occupation
    reduction: Reduction | None  # of `occupation` so far
    problem: tuple[str, str, str] | None  # code, text, remedy: why there is no reduction (yet)
    trace: Trace | None
    effective_epochs: float | None  # 'worth about k independent ones'
    correlation_lengths: float | None  # duration / correlation time
    convergence: Convergence | None = None  # the running mean, where the looker asked for it; may be some seconds old
