"""A simulated receiver: a seeded stream of epochs, each a burst of sentences, and the truth behind it.

The same seed, scenario, site, rate and first second give the same bytes. Three streams of random numbers (errors,
events, sky) are kept apart, so that a change of what is sent about satellites does not move a position.
`write_stream` makes a whole file at once; `sim_link` sends the same bursts in time.
"""

from __future__ import annotations

import math
import random
from dataclasses import dataclass, replace

from fieldbook.links import sim_sentences as say
from fieldbook.links.sim_errors import SIZES, Enu, FixErrors
from fieldbook.links.sim_scenarios import (
    AUTONOMOUS,
    DEFAULT_SITE,
    DIFFERENTIAL,
    FIXED,
    FLOAT,
    NO_FIX,
    SCENARIOS,
    Initialisation,
    Scenario,
    Site,
    Truth,
)
from fieldbook.links.sim_sky import FLATTENING, Dop, Seen, Sky, dop

SEMI_MAJOR_M = 6_378_137.0  # GRS80
# What the receiver claims of itself, one standard deviation horizontal, m: too good by about two, as observed.
CLAIMED_M = {FIXED: 0.005, FLOAT: 0.09, DIFFERENTIAL: 0.25, AUTONOMOUS: 0.9}
NAMES = {FIXED: "fixed", FLOAT: "float", DIFFERENTIAL: "differential", AUTONOMOUS: "autonomous"}


@dataclass(frozen=True)
class Burst:
    """The sentences of one epoch. `data` is empty in a gap."""

    utc_ms: int
    data: bytes


class Receiver:
    """One simulated receiver.

    Args:
        scenario: what it does.
        seed: of all draws.
        first_utc_ms: fix time of the first epoch; the grid of fix times starts there.
        site: where it stands.
        rate_hz: fixes a second, None = the scenario's.
    """

    def __init__(
        self,
        scenario: Scenario,
        *,
        seed: int,
        first_utc_ms: int,
        site: Site = DEFAULT_SITE,
        rate_hz: float | None = None,
    ) -> None:
        self.scenario = scenario if rate_hz is None else replace(scenario, rate_hz=rate_hz)
        self.site = site
        self.step_ms = round(1000.0 / self.scenario.rate_hz)
        self.next_utc_ms = first_utc_ms
        self._draws = {name: random.Random(f"{name} {seed}") for name in ("events", "sky")}  # noqa: S311
        self._errors = {
            quality: FixErrors(quality, random.Random(f"errors {quality} {seed}"))  # noqa: S311
            for quality in SIZES
        }
        self._sky = Sky(site.lat_deg, site.lon_deg, scenario.mask_deg, scenario.obstruction, self._draws["sky"])
        self._seen: list[Seen] = []
        self._dop: Dop | None = None
        self._sky_second = -1
        self._stage = -1
        self._stage_start_s = 0.0
        self._constant: Enu = (0.0, 0.0, 0.0)
        self._gap_open = False
        qualities = sorted({stage.quality for stage in scenario.stages if stage.quality in SIZES})
        self.truth = Truth(
            scenario.name,
            seed,
            site,
            first_utc_ms,
            session_bias_enu_m={NAMES[item]: self._errors[item].session_enu_m for item in qualities},
            sigmas={NAMES[item]: _sizes(item) for item in qualities},
        )

    def next_burst(self) -> Burst:
        """The next epoch on the grid of fix times; empty data where nothing is sent."""
        utc_ms = self.next_utc_ms
        self.next_utc_ms += self.step_ms
        elapsed_s = (utc_ms - self.truth.first_utc_ms) / 1000.0
        steps = {quality: errors.step(self.step_ms / 1000.0) for quality, errors in self._errors.items()}
        stray = self._stray()
        missing = self._draws["events"].random() < self.scenario.missing_share
        self._enter_stage(elapsed_s)
        quality = self.scenario.stages[self._stage].quality
        self._note(utc_ms, quality)
        if self._in_gap(utc_ms, elapsed_s) or missing:
            return Burst(utc_ms, b"")
        self._look_up(utc_ms)
        error = self._total(steps.get(quality, (0.0, 0.0, 0.0)), quality, elapsed_s)
        if stray is not None and quality != NO_FIX:
            error = (error[0] + stray[0], error[1] + stray[1], error[2] + stray[2])
            self.truth.outliers_utc_ms.append(utc_ms)
        self.truth.epochs += 1
        self.truth.last_utc_ms = utc_ms
        counts = self.truth.epochs_by_quality
        counts[quality] = counts.get(quality, 0) + 1
        return Burst(utc_ms, self._sentences(self._fix(utc_ms, quality, error, elapsed_s)))

    def _stray(self) -> Enu | None:
        draws = self._draws["events"]
        if draws.random() >= self.scenario.outlier_share:
            return None
        length_m = draws.uniform(*self.scenario.outlier_m)
        direction = draws.uniform(0.0, 2.0 * math.pi)
        return length_m * math.sin(direction), length_m * math.cos(direction), length_m * draws.uniform(-1.5, 1.5)

    def _enter_stage(self, elapsed_s: float) -> None:
        index = self.scenario.stage_at(elapsed_s)
        if index == self._stage:
            return
        self._stage, self._stage_start_s = index, elapsed_s
        quality = self.scenario.stages[index].quality
        self._constant = (0.0, 0.0, 0.0)
        if quality == FIXED:
            self._constant = self._errors[FIXED].draw_initialisation()
        elif quality == FLOAT:
            self._constant = self._errors[FLOAT].draw_convergence()

    def _note(self, utc_ms: int, quality: int) -> None:
        """Keep the list of initialisations: a new one where a fixed stage begins."""
        if quality != FIXED:
            return
        stage = self.scenario.stages[self._stage]
        known = self.truth.initialisations
        if known and known[-1].to_utc_ms == utc_ms - self.step_ms and known[-1].bias_enu_m == self._constant:
            known[-1].to_utc_ms = utc_ms
            return
        known.append(Initialisation(utc_ms, utc_ms, quality, stage.wrong_enu_m, self._constant))

    def _in_gap(self, utc_ms: int, elapsed_s: float) -> bool:
        inside = any(start <= elapsed_s < end for start, end in self.scenario.gaps_s)
        gaps = self.truth.gaps_utc_ms
        if inside and not self._gap_open:
            gaps.append((utc_ms, utc_ms))
        if self._gap_open:
            gaps[-1] = (gaps[-1][0], utc_ms)
        self._gap_open = inside
        return inside

    def _look_up(self, utc_ms: int) -> None:
        second = utc_ms // 1000
        if second != self._sky_second:
            self._sky_second = second
            self._seen = self._sky.at(utc_ms / 1000.0)
            self._dop = dop(self._seen)

    def _total(self, error: Enu, quality: int, elapsed_s: float) -> Enu:
        constant = self._constant
        if quality == FLOAT:
            left = math.exp(-(elapsed_s - self._stage_start_s) / SIZES[FLOAT].converge_s)
            constant = (constant[0] * left, constant[1] * left, constant[2] * left)
        wrong = self.scenario.stages[self._stage].wrong_enu_m
        east, north, up = (error[i] + constant[i] + wrong[i] for i in range(3))
        return east, north, up

    def _fix(self, utc_ms: int, quality: int, error: Enu, elapsed_s: float) -> say.Fix:
        point = self.site.point_enu_m
        east_m, north_m, up_m = (error[i] + point[i] for i in range(3))
        lat_deg, lon_deg, h_m = moved(self.site, east_m, north_m, up_m)
        corrected = quality in {DIFFERENTIAL, FIXED, FLOAT}
        claimed_m = CLAIMED_M.get(quality, 0.0)
        hdop = self._dop.hdop if self._dop else 1.0
        vdop = self._dop.vdop if self._dop else 1.5
        wobble = 1.0 + 0.1 * math.sin(elapsed_s / 97.0)
        return say.Fix(
            utc_ms=utc_ms,
            quality=quality,
            lat_deg=lat_deg,
            lon_deg=lon_deg,
            altitude_m=h_m - self.site.separation_m,
            separation_m=self.site.separation_m,
            satellites=sum(item.used for item in self._seen) if quality != NO_FIX else 0,
            dop=self._dop,
            age_s=1.0 + (elapsed_s % 1.0) if corrected else None,
            station=self.scenario.station,
            sigma_enu_m=(claimed_m * wobble * 0.9, claimed_m * wobble, claimed_m * wobble * vdop / max(hdop, 0.1)),
            speed_knots=abs(self._draws["events"].gauss(0.0, 0.01)),
            minute_decimals=self.scenario.minute_decimals,
            altitude_decimals=self.scenario.altitude_decimals,
            separation_decimals=self.scenario.separation_decimals,
        )

    def _sentences(self, fix: say.Fix) -> bytes:
        parts = [say.gga(fix), say.gst(fix), say.rmc(fix)]
        if fix.utc_ms % 1000 == 0:
            parts.append(say.zda(fix.utc_ms))
            if (fix.utc_ms // 1000) % self.scenario.sky_every_s == 0:
                parts += say.gsa(self._seen, self._dop, fixed=fix.quality != NO_FIX)
                parts += say.gsv(self._seen)
        return b"".join(parts)


def _sizes(quality: int) -> dict[str, float]:
    sizes = SIZES[quality]
    return {name: getattr(sizes, name) for name in sizes.__dataclass_fields__}


def moved(site: Site, east_m: float, north_m: float, up_m: float) -> tuple[float, float, float]:
    """Latitude, longitude (degrees) and ellipsoidal height (m) of a point near the mark.

    By the radii of curvature of GRS80 at the mark; within 0.01 mm for the few metres used here.
    """
    eccentricity2 = FLATTENING * (2.0 - FLATTENING)
    sin_lat = math.sin(math.radians(site.lat_deg))
    across_m = SEMI_MAJOR_M / math.sqrt(1.0 - eccentricity2 * sin_lat**2)
    along_m = across_m * (1.0 - eccentricity2) / (1.0 - eccentricity2 * sin_lat**2)
    cos_lat = math.cos(math.radians(site.lat_deg))
    lat_deg = site.lat_deg + math.degrees(north_m / (along_m + site.h_m))
    lon_deg = site.lon_deg + math.degrees(east_m / ((across_m + site.h_m) * cos_lat))
    return lat_deg, lon_deg, site.h_m + up_m


def write_stream(
    scenario: Scenario | str,
    *,
    seed: int,
    first_utc_ms: int,
    duration_s: float,
    site: Site = DEFAULT_SITE,
    rate_hz: float | None = None,
) -> tuple[bytes, Truth]:
    """A whole occupation at once.

    Args:
        scenario: a scenario or the name of one.
        seed: of all draws.
        first_utc_ms: fix time of the first epoch, milliseconds since 1970.
        duration_s: from the first fix time to the one after the last.
        site: mark and reported point.
        rate_hz: fixes a second, None = the scenario's.

    Returns:
        The bytes as received, and the truth.

    Raises:
        KeyError: no scenario of this name.
    """
    chosen = SCENARIOS[scenario] if isinstance(scenario, str) else scenario
    receiver = Receiver(chosen, seed=seed, first_utc_ms=first_utc_ms, site=site, rate_hz=rate_hz)
    end_utc_ms = first_utc_ms + round(duration_s * 1000)
    parts = []
    while receiver.next_utc_ms < end_utc_ms:
        parts.append(receiver.next_burst().data)
    return b"".join(parts), receiver.truth
