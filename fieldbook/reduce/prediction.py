"""How much longer: the observing time at which a printed 95 % figure will meet its requirement.

Strategy: only the Type A term shrinks with time. With tau and eta as estimated so far its shape is

    G(T) = 0.9 g(T/tau) + 0.1 g(T/8 tau) + eta min(1, b/T),   g(r) = 2/r [1 - (1 - e^-r)/r]
    u_A(T') = u_A(T) sqrt(G(T')/G(T)),   nu_A(T') = max(nu_A, 4 + min(T'/4 tau, 28))

The caller turns a predicted Type A into the very figure it prints (all other budget lines unchanged); the solver
bisects the time, up to 24 h. The requirement is divided by a margin, since a prediction may be missed: the answer is
the time for requirement/margin, the range starts at the time for the requirement itself.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from fieldbook.reduce.correlated_mean import (
    SLOW_FACTOR,
    SLOW_SHARE,
    Component,
    CorrelatedMean,
    process_variance,
)

LONGEST_S = 86_400.0
_TOLERANCE_S = 0.5


@dataclass(frozen=True)
class TypeA:
    """Type A part of the budget, now or predicted: metres and dof per axis, correlation of east and north."""

    u_enu_m: tuple[float, float, float | None]
    dof_enu: tuple[float, float, float | None]
    rho_en: float


@dataclass(frozen=True)
class TimeToGo:
    """Answer of the solver. state: 'reached', 'predicted', 'not safely reachable', 'cannot reach'.

    seconds: None when it cannot be said. from_s and to_s: the range, from the time for the bare requirement on.
    longest_m: the figure after 24 h in all; when even that is not enough the caller names the line that forbids.
    """

    state: str
    seconds: float | None
    from_s: float | None
    to_s: float | None
    longest_m: float | None


def type_a(mean: CorrelatedMean) -> TypeA:
    """The Type A part as it stands now."""
    return predicted_type_a(mean, mean.observed_s)


def predicted_type_a(mean: CorrelatedMean, time_s: float) -> TypeA:
    """The Type A part after `time_s` of observation in all (seconds, not less than observed so far)."""
    parts = [None if item is None else _predicted(item, mean, time_s) for item in mean.components]
    east, north, up = parts
    assert east is not None  # noqa: S101 - east and north always exist in a CorrelatedMean
    assert north is not None  # noqa: S101
    return TypeA(
        (east[0], north[0], None if up is None else up[0]),
        (east[1], north[1], None if up is None else up[1]),
        mean.rho_en,
    )


def _predicted(item: Component, mean: CorrelatedMean, time_s: float) -> tuple[float, float]:
    if time_s <= mean.observed_s:
        return item.u_m, item.dof
    now, then = _shape(item, mean.bin_s, mean.observed_s), _shape(item, mean.bin_s, time_s)
    return item.u_m * (then / now) ** 0.5, max(item.dof, 4 + min(time_s / (4 * item.tau_s), 28))


def _shape(item: Component, bin_s: float, time_s: float) -> float:
    ratio = time_s / item.tau_s
    process = (1 - SLOW_SHARE) * process_variance(ratio) + SLOW_SHARE * process_variance(ratio / SLOW_FACTOR)
    return process + item.eta * min(1.0, bin_s / time_s)


def time_to_go(
    mean: CorrelatedMean,
    required_m: float,
    figure: Callable[[TypeA], float | None],
    margin: float,
) -> TimeToGo:
    """Time still needed until a printed figure meets `required_m`.

    Args:
        mean: the estimate so far.
        required_m: the requirement.
        figure: printed figure (horizontal95 or vertical95, metres) for a Type A part; None = not known.
        margin: of the class of fix, 1.05 (RTK fixed) or 1.15.
    """
    have = figure(type_a(mean))
    if have is not None and have <= required_m:
        return TimeToGo("reached", 0.0, 0.0, 0.0, have)

    def after(time_s: float) -> float | None:
        return figure(predicted_type_a(mean, time_s))

    longest = after(max(LONGEST_S, mean.observed_s))
    if have is None or longest is None:
        return TimeToGo("cannot reach", None, None, None, None)
    bare = _solve(after, required_m, mean.observed_s, longest)
    if bare is None:
        return TimeToGo("cannot reach", None, None, None, longest)
    safe = _solve(after, required_m / margin, mean.observed_s, longest)
    if safe is None:
        return TimeToGo("not safely reachable", None, bare, None, longest)
    return TimeToGo("predicted", safe, bare, safe, longest)


def _solve(after: Callable[[float], float | None], wanted_m: float, now_s: float, longest_m: float) -> float | None:
    """Seconds from now until the figure is `wanted_m`, by bisection; None when 24 h in all do not suffice."""
    if longest_m > wanted_m:
        return None
    low, high = now_s, max(LONGEST_S, now_s)
    while high - low > _TOLERANCE_S:
        middle = (low + high) / 2
        value = after(middle)
        if value is None or value > wanted_m:
            low = middle
        else:
            high = middle
    return high - now_s
