"""What the number of received digits does to a mean.

Strategy: the step of a coordinate is known from its digits (one minute of latitude is taken as 1852.2 m; exact to
1 %, plenty for a quantum). Averaging removes the rounding only while the scatter is larger than the step:

    u_q = q/sqrt(12) exp(-2 pi^2 s^2/q^2),   s^2 = max(sd^2 - q^2/12, 0)

(first harmonic of the rounding error of a normal variable). RTK with four decimals of a minute: the Type A figure
alone covers 10 %, with u_q 97 %. The scatter of few values is not noise: a mark near the edge of a step makes two values
toggle with an sd of up to q/2 however still the receiver is. D distinct values span at least D - 2 steps, and a sample
spans hardly less than six of its own standard deviations, so s is never taken larger than (D - 2) q/6: at most two
values average nothing away, six and more leave the formula as it is. The separation is a constant of the place: its rounding is never averaged.
Digits can also lie (a receiver that pads zeros), so the step is the largest of: the printed one; the power of ten that
divides every value, where fewer than six occur and chance would do that in no more than one case of a hundred; the
smallest gap between three to five values; the greatest common divisor of the gaps from six values on. Too coarse a step
found by chance makes a figure wider, never smaller.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

METRES_PER_MINUTE = 1852.2
FEW_DISTINCT = 6  # fewer distinct values than this: the resolution governs (finding)
SPAN_SIGMAS = 6.0  # own choice: range of a sample in its standard deviations, for the noise that few values allow
LEAST_FOR_GAP = 3  # of two values nothing says that they are neighbours
LEAST_EVIDENCE = 2  # zeros x values: 1 in 100 by chance
_MOST_DISTINCT = 64


def coordinate_quantum_m(decimals: int, cos_latitude: float = 1.0) -> float:
    """Step of ddmm.mmm with that many decimals, on the ground; `cos_latitude` for longitudes."""
    return float(METRES_PER_MINUTE * 10.0**-decimals * cos_latitude)


def mean_resolution_u_m(quantum_m: float, sd_m: float, distinct: int | None = None) -> float:
    """u_q of a mean of readings rounded to `quantum_m` whose rounded values scatter with `sd_m`.

    `distinct`: how many different values were received; None = many.
    """
    if quantum_m <= 0:
        return 0.0
    variance = max(sd_m**2 - quantum_m**2 / 12, 0.0)
    if distinct is not None:
        variance = min(variance, (max(distinct - 2, 0) * quantum_m / SPAN_SIGMAS) ** 2)
    return quantum_m / math.sqrt(12) * math.exp(-2 * math.pi**2 * variance / quantum_m**2)


def constant_resolution_u_m(decimals: int) -> float:
    """10^-d/sqrt(12): a constant printed to d decimals of a metre. d = the FEWEST in the occupation."""
    return float(10.0**-decimals / math.sqrt(12))


@dataclass
class Digits:
    """What has been seen of one received field; exact and independent of how the epochs were split.

    `divisor`: greatest common divisor of all differences, `common`: of the values themselves, in the field's integer unit
    (0 = one value so far; nothing but zeros so far).
    """

    fewest_decimals: int | None = None
    divisor: int = 0
    first: int | None = None
    distinct: set[int] = field(default_factory=set)  # the first 64 distinct values
    common: int = 0

    def add(self, values: NDArray[np.int64], decimals: NDArray[np.int64]) -> None:
        """Take in received integers and their decimals, shape (n,) each, none missing."""
        if values.size == 0:
            return
        fewest = int(decimals.min())
        self.fewest_decimals = fewest if self.fewest_decimals is None else min(fewest, self.fewest_decimals)
        if self.first is None:
            self.first = int(values[0])
        self.divisor = math.gcd(self.divisor, int(np.gcd.reduce(np.abs(values - self.first))))
        self.common = math.gcd(self.common, int(np.gcd.reduce(np.abs(values))))
        if len(self.distinct) < _MOST_DISTINCT:
            found, position = np.unique(values, return_index=True)
            for value in found[np.argsort(position)]:
                if len(self.distinct) == _MOST_DISTINCT:
                    break
                self.distinct.add(int(value))

    def copy(self) -> Digits:
        """An independent copy, for a look ahead."""
        return Digits(self.fewest_decimals, self.divisor, self.first, set(self.distinct), self.common)

    def merged(self, other: Digits) -> Digits:
        """Both together (distinct values: up to the bound)."""
        if self.first is None or other.first is None:
            return (self if other.first is None else other).copy()
        known = [item for item in (self.fewest_decimals, other.fewest_decimals) if item is not None]
        divisor = math.gcd(self.divisor, other.divisor, abs(self.first - other.first))
        distinct = set(sorted(self.distinct | other.distinct)[:_MOST_DISTINCT])
        return Digits(min(known), divisor, self.first, distinct, math.gcd(self.common, other.common))

    @property
    def count_distinct(self) -> int:
        """Number of distinct values, counted up to 64."""
        return len(self.distinct)

    def step_units(self, unit_decimals: int, beside: Digits | None = None) -> float | None:
        """Step in the field's integer unit: from the digits, or coarser if the values say that zeros are padded.

        Args:
            unit_decimals: number of decimals of the integer unit (8 for coordinates, 5 for heights).
            beside: a field of the same format (latitude and longitude), whose values count as evidence, too.
        """
        if self.fewest_decimals is None:
            return None
        printed = 10.0 ** max(unit_decimals - self.fewest_decimals, 0)
        if self.count_distinct >= FEW_DISTINCT:
            return max(printed, float(self.divisor))
        values = sorted(self.distinct)
        gap = min((b - a for a, b in pairwise(values)), default=0) if len(values) >= LEAST_FOR_GAP else 0
        return max(printed, self.padded_units(unit_decimals, beside), float(gap))

    def padded_units(self, unit_decimals: int, beside: Digits | None = None) -> float:
        """Largest power of ten that divides every value; the printed step where chance might do that.

        One value ends in k zeros by chance once in 10^k; all D values once in 10^(k D): believed from k D = 2 on.
        """
        if self.fewest_decimals is None:
            return 0.0
        printed = 10 ** max(unit_decimals - self.fewest_decimals, 0)
        common, count = self.common, self.count_distinct
        if beside is not None and beside.first is not None:
            common, count = math.gcd(common, beside.common), count + beside.count_distinct
        step = printed
        while common and common % (10 * step) == 0:
            step *= 10
        zeros = round(math.log10(step / printed))
        return float(step if zeros * count >= LEAST_EVIDENCE else printed)
