"""What a simulated receiver does and when: sites, stages of the fix, and the table of named scenarios.

A scenario is a plain value. It says which stages of fix follow each other (float, fixed, fixed wrongly), when
nothing is sent, how often a fix strays, and how the receiver writes its sentences. The sizes of the errors are in
`sim_errors`, the sky in `sim_sky`.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

NO_FIX, AUTONOMOUS, DIFFERENTIAL, FIXED, FLOAT = 0, 1, 2, 4, 5  # GGA quality indicators


@dataclass(frozen=True)
class Site:
    """Where the simulated antenna stands. All places are invented.

    Attributes:
        lat_deg, lon_deg, h_m: the mark, geodetic in the frame of the receiver's coordinates; h ellipsoidal.
        separation_m: geoid separation by the receiver's own model.
        point_enu_m: from the mark to the point whose coordinates the receiver reports (phase centre or ARP),
            east, north, up.
    """

    lat_deg: float
    lon_deg: float
    h_m: float
    separation_m: float
    point_enu_m: tuple[float, float, float] = (0.0, 0.0, 0.0)


@dataclass(frozen=True)
class Stage:
    """One stage of the fix.

    Attributes:
        start_s: seconds after the first epoch.
        quality: GGA quality indicator.
        wrong_enu_m: constant error of a wrongly fixed initialisation; zero when the fix is right.
    """

    start_s: float
    quality: int
    wrong_enu_m: tuple[float, float, float] = (0.0, 0.0, 0.0)


@dataclass(frozen=True)
class Scenario:
    """One behaviour of a receiver.

    Attributes:
        name, summary: for lists.
        stages: in order of `start_s`; the last one lasts.
        gaps_s: spans (from, to) in which nothing is sent.
        outlier_share: share of epochs that stray; `outlier_m` is the smallest and largest stray.
        missing_share: share of epochs that are not sent at all.
        rate_hz: fixes a second.
        minute_decimals, altitude_decimals, separation_decimals: digits the receiver prints.
        sky_every_s: GSA and GSV are sent every so many seconds.
        mask_deg: no satellite below this elevation.
        obstruction: azimuth from, azimuth to, elevation below which that sector is covered; None = open sky.
        station: correction station, four digits.
    """

    name: str
    summary: str
    stages: tuple[Stage, ...]
    gaps_s: tuple[tuple[float, float], ...] = ()
    outlier_share: float = 0.0
    outlier_m: tuple[float, float] = (0.05, 0.30)
    missing_share: float = 0.0
    rate_hz: float = 1.0
    minute_decimals: int = 8
    altitude_decimals: int = 4
    separation_decimals: int = 3
    sky_every_s: int = 1
    mask_deg: float = 10.0
    obstruction: tuple[float, float, float] | None = (205.0, 260.0, 32.0)
    station: str = "0042"

    def stage_at(self, elapsed_s: float) -> int:
        """Index of the stage in force."""
        index = 0
        for number, stage in enumerate(self.stages):
            if stage.start_s <= elapsed_s:
                index = number
        return index


# Kestrel Ridge and its mark are invented; the separation is EGM96's there, as a receiver would carry it.
DEFAULT_SITE = Site(
    lat_deg=-34.2743161,
    lon_deg=146.0518424,
    h_m=231.846,
    separation_m=13.482,
    point_enu_m=(-0.0003, 0.0005, 1.5819),
)

_RTK = Scenario("rtk", "fixed from the first epoch, 1 Hz", (Stage(0.0, FIXED),))

SCENARIOS: dict[str, Scenario] = {
    item.name: item
    for item in (
        _RTK,
        replace(_RTK, name="rtk-10hz", summary="fixed from the first epoch, 10 Hz", rate_hz=10.0),
        Scenario(
            "two-inits",
            "float, fixed, lost at 5 min, fixed again: both initialisations right",
            (Stage(0.0, FLOAT), Stage(12.0, FIXED), Stage(300.0, FLOAT), Stage(315.0, FIXED)),
        ),
        Scenario(
            "reinit",
            "three initialisations, the middle one wrong by 0.35 m",
            (
                Stage(0.0, FLOAT),
                Stage(15.0, FIXED),
                Stage(240.0, FLOAT),
                Stage(255.0, FIXED, (0.24, -0.16, 0.20)),
                Stage(375.0, FLOAT),
                Stage(395.0, FIXED),
            ),
            outlier_share=0.005,
        ),
        Scenario("float", "float only: never fixed", (Stage(0.0, FLOAT),)),
        Scenario("dgps", "code differential, decimetres", (Stage(0.0, DIFFERENTIAL),), minute_decimals=7),
        Scenario(
            "autonomous",
            "no corrections, metres",
            (Stage(0.0, AUTONOMOUS),),
            minute_decimals=7,
            altitude_decimals=3,
        ),
        Scenario(
            "cold-start",
            "no fix for 20 s, then autonomous, float, fixed",
            (Stage(0.0, NO_FIX), Stage(20.0, AUTONOMOUS), Stage(45.0, FLOAT), Stage(70.0, FIXED)),
        ),
        Scenario(
            "gaps",
            "fixed, with 20 s of silence every two minutes and one epoch in a hundred missing",
            (Stage(0.0, FIXED),),
            gaps_s=tuple((start, start + 20.0) for start in range(100, 86_400, 120)),
            missing_share=0.01,
        ),
    )
}


@dataclass
class Initialisation:
    """One run of a fixed stage, as it really was."""

    from_utc_ms: int
    to_utc_ms: int
    quality: int
    wrong_enu_m: tuple[float, float, float]
    bias_enu_m: tuple[float, float, float]


@dataclass
class Truth:
    """What the simulator knows and the receiver does not tell.

    Attributes:
        site: mark and reported point.
        seed: of every draw.
        session_bias_enu_m: constant error of the whole run (per kind of fix).
        initialisations: runs of fixed epochs, with their error.
        gaps_utc_ms: spans without output.
        outliers_utc_ms: epochs that strayed.
        epochs, fixed_epochs: number sent.
    """

    scenario: str
    seed: int
    site: Site
    first_utc_ms: int
    last_utc_ms: int = 0
    epochs: int = 0
    epochs_by_quality: dict[int, int] = field(default_factory=dict)
    session_bias_enu_m: dict[str, tuple[float, float, float]] = field(default_factory=dict)
    sigmas: dict[str, dict[str, float]] = field(default_factory=dict)
    initialisations: list[Initialisation] = field(default_factory=list)
    gaps_utc_ms: list[tuple[int, int]] = field(default_factory=list)
    outliers_utc_ms: list[int] = field(default_factory=list)
