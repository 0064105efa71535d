"""Position errors of a simulated receiver: correlated in time, as real ones are.

Per component white noise, two first-order Gauss-Markov terms, a sinusoid of 6 to 12 minutes (a reflection below a
two-metre antenna) and a constant for the session. The sizes are a working proposal of this project, not a
measurement of any receiver. RTK lies near the 8-10 mm horizontal and 15-20 mm vertical of published guidelines
for real-time work, with the two time scales that two-term Gauss-Markov fits of real-time series have found; the
vertical is twice the horizontal. A wrong fix is no part of this: it is a stage of the scenario.
"""

from __future__ import annotations

import math
import random
from dataclasses import dataclass

from fieldbook.links.sim_scenarios import AUTONOMOUS, DIFFERENTIAL, FIXED, FLOAT

Enu = tuple[float, float, float]


@dataclass(frozen=True)
class ErrorSizes:
    """Standard deviations in metres and time constants in seconds, horizontal; up = `up_factor` times.

    Attributes:
        white_m: independent from epoch to epoch.
        fast_m, fast_s: first Gauss-Markov term.
        slow_m, slow_s, slow_up_s: second one; its time constant in the vertical differs.
        wave_m: amplitude of the sinusoid.
        session_m: constant of the session.
        initialisation_m: constant of one initialisation.
        converge_m, converge_s: start of a float solution and the time constant of its decay.
    """

    white_m: float
    fast_m: float
    fast_s: float
    slow_m: float
    slow_s: float
    slow_up_s: float
    wave_m: float = 0.0
    session_m: float = 0.0
    initialisation_m: float = 0.0
    converge_m: float = 0.0
    converge_s: float = 1.0
    up_factor: float = 2.0


SIZES: dict[int, ErrorSizes] = {
    FIXED: ErrorSizes(0.003, 0.004, 60.0, 0.006, 1000.0, 2200.0, 0.003, 0.004, 0.002),
    FLOAT: ErrorSizes(0.010, 0.05, 60.0, 0.12, 600.0, 900.0, 0.0, 0.05, 0.0, 0.30, 150.0, 1.6),
    DIFFERENTIAL: ErrorSizes(0.05, 0.20, 120.0, 0.35, 1200.0, 1500.0, 0.10, 0.15, 0.0, 0.0, 1.0, 1.7),
    AUTONOMOUS: ErrorSizes(0.20, 0.60, 120.0, 1.0, 3600.0, 3600.0, 0.0, 0.5, 0.0, 0.0, 1.0, 2.0),
}

SHORTEST_WAVE_S, LONGEST_WAVE_S = 360.0, 720.0


class GaussMarkov:
    """A first-order Gauss-Markov process, stepped exactly for any step length.

    x(t+dt) = a x(t) + sigma sqrt(1 - a^2) n, a = exp(-dt/tau); autocorrelation exp(-|dt|/tau).
    """

    def __init__(self, sigma_m: float, tau_s: float, draws: random.Random) -> None:
        self._sigma_m, self._tau_s, self._draws = sigma_m, tau_s, draws
        self.value_m = sigma_m * draws.gauss(0.0, 1.0)

    def step(self, seconds: float) -> float:
        """The value after `seconds`."""
        kept = math.exp(-seconds / self._tau_s)
        noise = self._sigma_m * math.sqrt(1.0 - kept * kept) * self._draws.gauss(0.0, 1.0)
        self.value_m = kept * self.value_m + noise
        return self.value_m


class Component:
    """Error of one component for one kind of fix."""

    def __init__(self, sizes: ErrorSizes, *, up: bool, draws: random.Random) -> None:
        factor = sizes.up_factor if up else 1.0
        self._draws = draws
        self._white_m = factor * sizes.white_m
        self._fast = GaussMarkov(factor * sizes.fast_m, sizes.fast_s, draws)
        self._slow = GaussMarkov(factor * sizes.slow_m, sizes.slow_up_s if up else sizes.slow_s, draws)
        self._wave_m = factor * sizes.wave_m
        self._period_s = draws.uniform(SHORTEST_WAVE_S, LONGEST_WAVE_S)
        self._phase = draws.uniform(0.0, 2.0 * math.pi)
        self.session_m = factor * sizes.session_m * draws.gauss(0.0, 1.0)
        self._elapsed_s = 0.0

    def step(self, seconds: float) -> float:
        """Error in metres after `seconds` more."""
        self._elapsed_s += seconds
        wave_m = self._wave_m * math.sin(2.0 * math.pi * self._elapsed_s / self._period_s + self._phase)
        correlated_m = self._fast.step(seconds) + self._slow.step(seconds)
        return self.session_m + wave_m + correlated_m + self._white_m * self._draws.gauss(0.0, 1.0)


class FixErrors:
    """Errors of all three components for one kind of fix, and the constants drawn for its stages."""

    def __init__(self, quality: int, draws: random.Random) -> None:
        self.sizes = SIZES[quality]
        self._draws = draws
        self._components = [Component(self.sizes, up=up, draws=draws) for up in (False, False, True)]

    @property
    def session_enu_m(self) -> Enu:
        """The constant of the session."""
        east, north, up = (item.session_m for item in self._components)
        return east, north, up

    def step(self, seconds: float) -> Enu:
        """East, north and up error in metres after `seconds` more."""
        east, north, up = (item.step(seconds) for item in self._components)
        return east, north, up

    def draw_initialisation(self) -> Enu:
        """The constant of a new initialisation."""
        return self._three(self.sizes.initialisation_m)

    def draw_convergence(self) -> Enu:
        """Where a new float solution starts from; it decays with `converge_s`."""
        return self._three(self.sizes.converge_m)

    def _three(self, sigma_m: float) -> Enu:
        east, north = (sigma_m * self._draws.gauss(0.0, 1.0) for _ in range(2))
        return east, north, self.sizes.up_factor * sigma_m * self._draws.gauss(0.0, 1.0)
