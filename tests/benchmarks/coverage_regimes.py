"""Regimes of the calibration benchmark: what simulated receivers do, and the reasons for the figures.

Sizes. One-process regimes have the standard deviations the classes of fix state (the benchmark asks whether the line
is calibrated when they hold; `coverage_studies` asks what happens when they do not). The multi-process RTK regimes
follow published practice: a sum of two first-order Gauss-Markov terms fits network RTK better than one, 17 minutes in
plan and 36 in height (Odolinski, GPS Solutions 16 (2012) 147-155, abstract); multipath of a two-metre antenna has
periods of 6 to 12 minutes (plane reflector). 1/f, fractional noise, sinusoids, biases per initialisation, wrong fixes,
gaps, outliers, bursts and frozen output: shapes that the estimator does not assume. Sizes of all of these: own choice.
"""

from __future__ import annotations

from dataclasses import replace

from coverage_simulator import Part, Regime

DURATIONS_S = (120, 300, 900, 3600, 14400)


def _gm(*pairs: tuple[float, float], white: float) -> tuple[Part, ...]:
    return (Part("white", white), *[Part("gm", sd, tau) for sd, tau in pairs])


RTK = Regime("rtk", 4, _gm((0.0077, 200), white=0.002), _gm((0.0145, 200), white=0.004))
RTK_TWO = Regime(
    "rtk_two", 4, _gm((0.004, 60), (0.006, 1000), white=0.003), _gm((0.008, 60), (0.012, 2200), white=0.006)
)
RTK_MULTIPATH = Regime(
    "rtk_multipath", 4,
    (*_gm((0.004, 60), (0.006, 400), white=0.003), Part("sine", 0.003, 420)),
    (*_gm((0.008, 60), (0.010, 600), white=0.006), Part("sine", 0.006, 420)),
)  # fmt: skip
RTK_FLICKER = Regime("rtk_flicker", 4, (Part("flicker", 0.008),), (Part("flicker", 0.015),))
RTK_FGN = Regime("rtk_fgn", 4, (Part("fgn", 0.008, 0.92),), (Part("fgn", 0.015, 0.92),))
# sizes of the class table; the second like `rtk_two`: a fast part beside one slower than the class
RTK_FLOAT = Regime("rtk_float", 5, _gm((0.20, 900), white=0.02), _gm((0.35, 900), white=0.04), decimals=6)
RTK_FLOAT_TWO = Regime(
    "rtk_float_two",
    5,
    _gm((0.12, 120), (0.16, 2700), white=0.02),
    _gm((0.20, 120), (0.28, 2700), white=0.04),
    decimals=6,
)
DGPS = Regime("dgps", 2, _gm((0.6, 700), white=0.05), _gm((1.0, 700), white=0.1), decimals=6)
DGPS_TWO = Regime(
    "dgps_two", 2, _gm((0.35, 120), (0.5, 1500), white=0.05), _gm((0.6, 120), (0.8, 1500), white=0.1), decimals=6
)
AUTONOMOUS = Regime("autonomous", 1, _gm((2.5, 1500), white=0.2), _gm((4.0, 1500), white=0.4), decimals=5)
AUTONOMOUS_TWO = Regime(
    "autonomous_two", 1, _gm((1.5, 120), (2.0, 3600), white=0.2), _gm((2.4, 120), (3.2, 3600), white=0.4), decimals=5
)

REGIMES: dict[str, Regime] = {
    item.name: item
    for item in (
        RTK,
        RTK_TWO,
        RTK_MULTIPATH,
        RTK_FLICKER,
        RTK_FGN,
        RTK_FLOAT,
        RTK_FLOAT_TWO,
        DGPS,
        DGPS_TWO,
        AUTONOMOUS,
        AUTONOMOUS_TWO,
        replace(RTK, name="rtk_init", group="disturbed", initialisations=2, bias_m=(0.005, 0.010)),
        replace(RTK, name="rtk_wrong", group="disturbed", initialisations=3, wrong_m=(0.1, 0.6)),
        replace(RTK, name="rtk_gaps", group="disturbed", gaps=True),
        replace(RTK, name="rtk_outliers", group="disturbed", outliers=True),
        # a burst that fills more than half a window of 60 s passes the windows
        replace(RTK, name="rtk_long_bursts", group="disturbed", outliers=True, burst_s=(30, 60)),
        replace(RTK, name="rtk_frozen", group="disturbed", frozen=True),
        replace(RTK, name="rtk_dec4", group="quantised", decimals=4, altitude_decimals=2),
        replace(RTK, name="rtk_dec5", group="quantised", decimals=5),
        replace(RTK, name="rtk_dec6", group="quantised", decimals=6),
        replace(RTK, name="rtk_dec8", group="quantised", decimals=8, altitude_decimals=4),
        # the receiver prints zeros behind the decimals it has
        replace(RTK, name="rtk_pad4", group="quantised", decimals=4, padded=(4, 0, 0)),
        replace(RTK, name="rtk_pad5", group="quantised", decimals=5, padded=(3, 0, 0)),
        replace(RTK, name="rtk_padalt1", group="quantised", altitude_decimals=1, padded=(0, 3, 0)),
        replace(RTK, name="rtk_padsep1", group="quantised", separation_decimals=1, padded=(0, 0, 2)),
        replace(RTK, name="rtk_alt1", group="quantised", altitude_decimals=1),
        replace(RTK, name="rtk_alt2", group="quantised", altitude_decimals=2),
        replace(RTK, name="rtk_sep1", group="quantised", separation_decimals=1),
        replace(RTK, name="rtk_sep2", group="quantised", separation_decimals=2),
    )
}

# Limits of one occupation, used to choose requirements that can be reached: see `coverage_studies`.
TIME_TO_GO = {
    "rtk": (RTK, (300, 900), ((0.015, 0.020), (0.018, 0.026)), 14_400),
    "rtk_two": (RTK_TWO, (300, 900), ((0.015, 0.020), (0.018, 0.026)), 14_400),
    "dgps": (replace(DGPS, step_s=5.0), (600, 1800), ((1.2, 1.7), (1.5, 2.1)), 43_200),
    "dgps_two": (replace(DGPS_TWO, step_s=5.0), (600, 1800), ((1.2, 1.7), (1.5, 2.1)), 43_200),
    "autonomous": (replace(AUTONOMOUS, step_s=5.0), (900, 3600), ((5.0, 7.0), (6.0, 8.0)), 57_600),
}
