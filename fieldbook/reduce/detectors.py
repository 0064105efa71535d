"""What is unusual about the errors of one occupation, from its 10 s means and its estimate alone: one call.

Strategy: every detector has a false-alarm rate of its own, measured on sound simulated sessions (tests), and states a
size; none of them sets an epoch aside, and all see the blocks that lie apart, too. Two that would say the same thing twice give way: where a step is found,
neither drift nor bursts are looked for.
"""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.reduce.drift import Drift, drift, settling_index
from fieldbook.reduce.estimate import Estimate
from fieldbook.reduce.multipath import Periodic, periodic
from fieldbook.reduce.series import Series
from fieldbook.reduce.smoothing import inside_ratio
from fieldbook.reduce.steps import Bursts, Step, bursts, steps, without_bursts


@dataclass(frozen=True)
class Detected:
    """Results of all detectors. settling_index and inside_ratio None: not enough data to say."""

    steps: list[Step]
    drift: Drift | None
    settling_index: float | None
    periodic: Periodic | None
    bursts: Bursts | None
    inside_ratio: float | None


def detect(found: Estimate) -> Detected:
    """Look for all of them."""
    series = Series.of(found.all_blocks)
    jumps = steps(series, found.fix_class, found.resolution.step_enu_m)
    jumped = without_bursts(jumps, series, Series.of(found.blocks))
    return Detected(
        steps=jumped,
        drift=None if jumped else drift(found),
        settling_index=settling_index(series, found.fix_class),
        periodic=periodic(series),
        bursts=None if jumped else bursts(series, found),
        inside_ratio=inside_ratio(series),
    )
