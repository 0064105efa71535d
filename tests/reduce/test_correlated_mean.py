"""The correlated mean against a slow, direct writing of its formulas, and its limits."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from made_epochs import gauss_markov
from scipy import integrate, special

from fieldbook.model.session import FixClass
from fieldbook.reduce.correlated_mean import (
    Bins,
    bin_correlation,
    correlated_mean,
    dof_of_ratio,
    governed_by,
    short_uncertainty_m,
)
from fieldbook.reduce.fix_classes import (
    AUTONOMOUS,
    CLASSES,
    DIFFERENTIAL,
    RTK_FIXED,
    RTK_FLOAT,
    class_of_quality,
    governing_class,
    with_receiver_estimate,
)
from fieldbook.reduce.quantisation import Digits, constant_resolution_u_m, coordinate_quantum_m, mean_resolution_u_m


def bins_of(values: np.ndarray, length_s: float = 10.0, index: np.ndarray | None = None, count: object = 10) -> Bins:
    n = len(values)
    return Bins(
        length_s,
        np.arange(n) if index is None else index,
        np.broadcast_to(np.asarray(count, dtype=np.int64), (n,)).copy(),
        np.asarray(values, dtype=float),
    )


def direct(bins: Bins, sigma0: float, tau0: float) -> tuple[float, float, float, list[tuple[float, float, float]]]:
    """The page's formulas one grid point at a time with plain inverses: (mean, U95, U68, [(weight, mu, u_g)])."""
    z, m = bins.mean_m, len(bins.mean_m)
    rows = []
    for zeta in np.linspace(-2.4, 2.4, 13):
        tau = tau0 * math.exp(0.9 * zeta)
        for eta in (0.003, 0.03, 0.1, 0.3, 1.0, 3.0, 10.0):
            c = np.zeros((m, m))
            for share, t in ((0.9, tau), (0.1, 8 * tau)):
                h = bins.length_s / t
                for i in range(m):
                    for j in range(m):
                        d = abs(int(bins.index[i] - bins.index[j]))
                        value = (
                            2 / h * (1 - (1 - math.exp(-h)) / h)
                            if d == 0
                            else ((1 - math.exp(-h)) / h) ** 2 * math.exp(-(d - 1) * h)
                        )
                        c[i, j] += share * value
            c += eta * np.diag(bins.count.mean() / bins.count)
            inverse, one = np.linalg.inv(c), np.ones(m)
            a = one @ inverse @ one
            mu = one @ inverse @ z / a
            ss = (z - mu) @ inverse @ (z - mu)
            nu = 4 + m - 1
            total = 4 * sigma0**2 + ss
            log_w = -0.5 * np.linalg.slogdet(c)[1] - 0.5 * math.log(a) - nu / 2 * math.log(total) - zeta**2 / 2
            rows.append((log_w, mu, math.sqrt(total / nu / a)))
    top = max(row[0] for row in rows)
    weights = np.array([math.exp(row[0] - top) for row in rows])
    weights /= weights.sum()
    mean = float(sum(w * row[1] for w, row in zip(weights, rows, strict=True)))

    def half_width(p: float) -> float:
        low, high = 0.0, 100 * sigma0
        for _ in range(60):
            mid = (low + high) / 2
            inside = sum(
                w * (2 * special.stdtr(4 + m - 1, mid / math.hypot(row[2], row[1] - mean)) - 1)
                for w, row in zip(weights, rows, strict=True)
            )
            low, high = (mid, high) if inside < p else (low, mid)
        return (low + high) / 2

    return mean, half_width(0.95), half_width(0.6827), [(w, r[1], r[2]) for w, r in zip(weights, rows, strict=True)]


@pytest.mark.parametrize("m", [1, 2, 9, 17])
def test_equals_the_formulas_written_out(m: int) -> None:
    """Gaps, unequal counts, unequal sigmas; 1e-7 relative for half-widths (28 bisections), 1e-10 m for the mean."""
    rng = np.random.default_rng(m)
    index = np.sort(rng.choice(3 * m, m, replace=False))
    counts = rng.integers(6, 12, m)
    east, north, up = (bins_of(rng.normal(0, s, m), 20.0, index, counts) for s in (0.006, 0.009, 0.02))
    result = correlated_mean(east, north, up, RTK_FIXED)
    for bins, found, sigma0 in ((east, result.east, 0.008), (north, result.north, 0.008), (up, result.up, 0.015)):
        assert found is not None
        mean, wide, narrow, _ = direct(bins, sigma0, 200.0)
        assert found.mean_m == pytest.approx(mean, abs=1e-10)
        assert found.half_width_95_m == pytest.approx(wide, rel=2e-6)
        assert found.half_width_68_m == pytest.approx(narrow, rel=2e-6)
        assert found.u_m * special.stdtrit(found.dof, 0.975) == pytest.approx(wide, rel=2e-6)
        upper = (1 + 0.6827) / 2
        assert found.u_m * special.stdtrit(found.dof, upper) == pytest.approx(narrow, rel=1e-4)


def test_bin_covariance_equals_the_double_integral() -> None:
    """Covariance of averages of exp(-|s - t|/tau), by numerical integration (scipy.integrate.dblquad), 1e-7."""
    g = bin_correlation(np.array([0, 1, 4]), 30.0, np.array([70.0]))[0]
    for i, first in enumerate((0, 1, 4)):
        for j, second in enumerate((0, 1, 4)):
            if first == second:  # split at the kink
                value = 2 * integrate.dblquad(lambda t, s: math.exp(-(s - t) / 70), 0, 30, 0, lambda s: s)[0]
            else:
                a, b = 30 * first, 30 * second
                value = integrate.dblquad(lambda t, s: math.exp(-abs(s - t) / 70), a, a + 30, b, b + 30)[0]
            assert g[i, j] == pytest.approx(value / 900, abs=1e-7)


def test_short_sessions_rest_on_the_class_and_long_ones_on_the_data() -> None:
    rng = np.random.default_rng(2)
    short = bins_of(gauss_markov(rng, 30, 1.0, 200.0, 0.006), 1.0)
    result = correlated_mean(short, short, short, RTK_FIXED)
    assert result.governed_by == "class"
    assert 0.4 < result.east.u_m / RTK_FIXED.horizontal_m < 1.6  # though 30 fixes scatter by 2 mm about their mean
    assert result.east.u_m > 5 * float(np.std(short.mean_m)) / math.sqrt(30)
    series = gauss_markov(rng, 28_800, 1.0, 60.0, 0.006)
    long = bins_of(series.reshape(32, 900).mean(axis=1), 900.0, count=900)
    quick = replace(RTK_FIXED, correlation_s=60.0)
    result = correlated_mean(long, long, long, quick)
    assert result.governed_by == "data"
    assert result.east.class_share < 0.9
    assert result.east.u_m < 0.003
    assert result.independent_epochs > 20


def test_shift_scale_and_rotation() -> None:
    """A shift moves the mean alone; scaling data and class scales everything."""
    rng = np.random.default_rng(7)
    z = rng.normal(0, 0.01, 20)
    base = correlated_mean(bins_of(z), bins_of(-z), bins_of(z), RTK_FIXED)
    moved = correlated_mean(bins_of(z + 5.0), bins_of(-z), bins_of(z), RTK_FIXED)
    assert moved.east.mean_m == pytest.approx(base.east.mean_m + 5.0, abs=1e-12)
    assert moved.east.u_m == pytest.approx(base.east.u_m, rel=1e-9)
    assert base.rho_en < -0.5  # north is the mirror of east
    tenfold = replace(RTK_FIXED, horizontal_m=0.08, vertical_m=0.15)
    larger = correlated_mean(bins_of(10 * z), bins_of(-10 * z), None, tenfold)
    assert larger.east.u_m == pytest.approx(10 * base.east.u_m, rel=1e-6)
    assert larger.up is None


def test_thin_bins_are_dropped_once() -> None:
    z = np.array([0.0, 0.0, 5.0, 0.0, 0.0])
    bins = bins_of(z, count=[10, 10, 2, 10, 10])
    assert correlated_mean(bins, bins, None, RTK_FIXED).east.mean_m == pytest.approx(0.0, abs=1e-12)
    thinned = bins.without_thin()
    assert thinned.without_thin() is thinned
    assert thinned.index.tolist() == [0, 1, 3, 4]


@settings(max_examples=50, deadline=None)
@given(st.floats(1.2, 1e5))
def test_dof_from_the_ratio_of_half_widths(dof: float) -> None:
    ratio = float(special.stdtrit(dof, 0.975) / special.stdtrit(dof, (1 + 0.6827) / 2))
    assert 1 / dof_of_ratio(ratio) == pytest.approx(1 / dof, abs=1e-6)


def test_short_uncertainty_is_near_the_full_one() -> None:
    """The one-matrix figure for comparing initialisations stays within a factor 2.5 of the full one."""
    rng = np.random.default_rng(5)
    for n in (1, 5, 20, 30):
        bins = bins_of(gauss_markov(rng, n, 2.0, 200.0, 0.007), 2.0)
        full = correlated_mean(bins, bins, None, RTK_FIXED).east.u_m
        assert 1 / 2.5 < short_uncertainty_m(bins, 0.008, 200.0) / full < 2.5


def test_boundaries_of_what_governs() -> None:
    assert [governed_by(t, 100.0) for t in (499, 500, 1999, 2000)] == [
        "class",
        "class and data",
        "class and data",
        "data",
    ]


# --- classes of fix ---------------------------------------------------------------------------------------------


def test_nothing_is_taken_for_fixed_without_the_receiver_saying_so() -> None:
    assert [class_of_quality(q) for q in (4, 5, 2)] == [RTK_FIXED, RTK_FLOAT, DIFFERENTIAL]
    assert all(class_of_quality(q) is AUTONOMOUS for q in (None, 0, 1, 3, 6, 7, 8, 9))
    assert governing_class([]) is AUTONOMOUS
    assert governing_class([4, 5]) is RTK_FLOAT
    assert governing_class([4, 2, 5]) is DIFFERENTIAL
    assert RTK_FIXED.floor_enu_m == (pytest.approx(0.0036), pytest.approx(0.0036), pytest.approx(0.00675))
    assert all(item.reason and item.source for item in CLASSES)


def test_override_and_receiver_estimate() -> None:
    own = governing_class([4], FixClass(0.012, 0.02, 90.0, "field test, two days"))
    assert (own.horizontal_m, own.correlation_s, own.source, own.margin) == (0.012, 90.0, "field test, two days", 1.05)
    raised, verdict = with_receiver_estimate(RTK_FIXED, 0.012, 0.010)
    assert (raised.horizontal_m, raised.vertical_m) == (0.012, 0.015)
    assert (verdict.horizontal, verdict.vertical) == ("used", "below")
    raised, verdict = with_receiver_estimate(RTK_FIXED, 0.08, None)
    assert raised is RTK_FIXED
    assert (verdict.horizontal, verdict.vertical) == ("beyond", "none")


# --- resolution -------------------------------------------------------------------------------------------------


def test_resolution_of_a_mean_against_drawn_readings() -> None:
    """Error of the mean of very many rounded readings, over all offsets: exact without scatter, else at least 75 %."""
    q = 0.0185
    for sd in (0.0, 0.002, 0.004, 0.006):
        offsets = (np.arange(400) + 0.5) / 400 * q
        grid = np.linspace(-5, 5, 4001)
        weight = np.exp(-(grid**2) / 2)
        weight /= weight.sum()
        rounded = np.round((offsets[:, None] + sd * grid[None, :]) / q) * q
        means = rounded @ weight
        spread = math.sqrt(float(np.mean((means - offsets) ** 2)))
        total_sd = math.sqrt(float(np.mean(((rounded - means[:, None]) ** 2) @ weight)))
        assert mean_resolution_u_m(q, total_sd) >= 0.75 * spread
        if sd == 0.0:
            assert mean_resolution_u_m(q, 0.0) == pytest.approx(spread, rel=0.01)
    assert mean_resolution_u_m(q, 0.02) < 1e-11


def test_steps_of_a_minute_of_arc() -> None:
    """decimals 4: 0.185 m, 5: 18.5 mm, 7: 0.185 mm (111132 m a degree); longitude at 50 degrees 0.119 m; 0.5 %."""
    assert coordinate_quantum_m(4) == pytest.approx(0.185, rel=5e-3)
    assert coordinate_quantum_m(7) == pytest.approx(0.000185, rel=5e-3)
    assert coordinate_quantum_m(4, math.cos(math.radians(50))) == pytest.approx(0.119, rel=5e-3)
    assert constant_resolution_u_m(1) == pytest.approx(0.0289, abs=5e-5)


def test_digits_see_padded_zeros_and_do_not_depend_on_chunks() -> None:
    rng = np.random.default_rng(1)
    values = 123_456_700_000 + 1000 * rng.integers(0, 50, 400)
    decimals = np.full(400, 8)
    whole, parts = Digits(), Digits()
    whole.add(values, decimals)
    for start in range(0, 400, 7):
        parts.add(values[start : start + 7], decimals[start : start + 7])
    assert whole == parts
    assert whole.step_units(8) == 1000.0  # 8 digits printed, 5 meant
    few = Digits()
    few.add(np.array([0, 4000]), np.array([7, 5]))
    assert few.step_units(8) == 1000.0  # the fewest digits; two values alone prove nothing coarser
    assert Digits().step_units(8) is None
    assert few.merged(whole).fewest_decimals == 5
