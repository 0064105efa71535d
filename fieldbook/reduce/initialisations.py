"""Which initialisations are right: the defence against a wrong fix, which is a cluster and not a tail.

Strategy. The place of an initialisation is the median of its block means, its u comes from its own data without the
least uncertainty claimed. Those within a tolerance of one another form clusters (single linkage):

    RTK fixed          max(30 mm, 4 u_d) horizontally, max(60 mm, 4 u_d) vertically, u_d of the difference
    other classes      the same multiples of the class sigma: 3.75 sigma_H and 4 sigma_V in place of 30 and 60 mm

but never more than twice (H) or 4/3 of (V) the first figure: the tolerance of very short initialisations must not
grow to hide a wrong fix of 0.1 m. The cluster with most kept epochs leads. With several clusters it decides only when
it holds 60 % of the epochs and two independent initialisations agree in it. If none does, the largest tolerance is tried:
right ones a little too far apart in a noisy session must not let a wrong one take the lead. It counts only if another
cluster stays apart and the question is then decided, so it never hides a disagreement. Otherwise the longest is reduced,
the distance to the others is a rectangular half-width of the budget, and the finding `initialisations_disagree` stops the
certificate. The members of the leading cluster are looked at once more, each against what the others say of its own time
(`second_look`): those they speak against become clusters of their own before anything is decided. Under 5 kept epochs an
initialisation is not used. The operator's decisions come first.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.session import FixClass
from fieldbook.reduce.apart import apart, rows_of
from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.columns import CODE_NUMBER
from fieldbook.reduce.correlated_mean import short_uncertainty_m
from fieldbook.reduce.fix_classes import ClassOfFix, governing_class, with_receiver_estimate
from fieldbook.reduce.kept_sums import InitialisationSums, median_gst_m
from fieldbook.reduce.resolution import steps_m
from fieldbook.reduce.screening import OUTLIER, Screened, counts_of
from fieldbook.reduce.second_look import LEAST_TO_LOOK_AGAIN, wrong_ones

Floats = NDArray[np.float64]

LEAST_EPOCHS = 5
DECIDING_SHARE, DECIDING_INDEPENDENT = 0.60, 2
RTK_TOLERANCE_M = (0.030, 0.060)
CLASS_TOLERANCE = (3.75, 4.0)  # 30 mm/8 mm and 60 mm/15 mm: the RTK figures in units of their class
MOST_OF_TOLERANCE = (2.0, 4.0 / 3.0)
UNCERTAINTIES = 4.0

Decisions = Mapping[int, tuple[bool, str]]


@dataclass(frozen=True)
class Place:
    """Where one initialisation lies: metres about the frame's origin and u per axis; up NaN without heights."""

    enu_m: tuple[float, float, float]
    u_enu_m: tuple[float, float, float]


@dataclass
class Judged:
    """One initialisation and what became of it. Instants in ms of the occupation's clock."""

    number: int
    first_ms: int
    last_ms: int
    kept: int
    independent: bool
    place: Place
    root: int  # the independent initialisation whose ambiguities it shares
    cluster: int = 0  # 1 = the leading one; 0 = not compared
    used: bool = False
    code: str = ""  # "initialisation" or "operator" where not used
    reason: str = ""
    offset_enu_m: tuple[float, float, float | None] | None = None  # from the mean of the used ones


@dataclass(frozen=True)
class Judgement:
    """All initialisations with kept epochs, in order, and the epochs' final codes.

    codes: uint8 (n,). disagreement_enu_m: rectangular half-width for the budget, None where the clusters are decided.
    blocks: of the used ones, without those that lie apart (`apart`); all_blocks: with them.
    """

    initialisations: list[Judged]
    codes: NDArray[np.uint8]
    fix_class: ClassOfFix
    clusters: int
    leading_share: float
    agreeing: int  # independent initialisations in the leading cluster
    disagreement_enu_m: tuple[float, float, float] | None
    blocks: Blocks
    all_blocks: Blocks

    @property
    def used(self) -> list[int]:
        """Numbers of the used ones."""
        return [item.number for item in self.initialisations if item.used]

    @property
    def wrong(self) -> list[Judged]:
        """Those of 5 epochs or more that lie elsewhere: each is reported as one."""
        return [item for item in self.initialisations if item.code == "initialisation" and item.kept >= LEAST_EPOCHS]

    @property
    def kept(self) -> int:
        """Number of epochs that are used."""
        return int(np.count_nonzero(self.codes == 0))

    @property
    def apart(self) -> int:
        """Number of epochs set aside because their block lies apart from its initialisation."""
        return int(self.all_blocks.column("count").sum() - self.blocks.column("count").sum())

    @property
    def set_aside(self) -> dict[str, int]:
        """Code -> number of epochs, all codes of the contract, only those that occur."""
        return counts_of(self.codes)


@dataclass
class InitialisationJudge:
    """Judges a screened occupation; remembers the places of initialisations that have ended, for live use."""

    override: FixClass | None = None
    _places: dict[tuple[int, int, int, str], Place] = field(default_factory=dict)

    def judge(self, screened: Screened, decisions: Decisions | None = None) -> Judgement:
        """Decide which initialisations are used.

        Args:
            screened: the result of screening.
            decisions: number -> (used, reason): the operator's entries.
        """
        decided = decisions or {}
        sums = [screened.initialisations[number] for number in sorted(screened.initialisations)]
        fix_class = governing_class({q for item in sums for q in item.qualities}, self.override)
        items = self._judged(screened, sums, fix_class)
        compared = [item for item in items if _admitted(item, decided)]
        labels = _labels(compared, fix_class)
        for item, label in zip(compared, labels, strict=True):
            item.cluster = label
        leading = _leading(compared, decided)
        _rank(compared, leading)
        looked_at = self._look_again(screened, [item for item in compared if item.cluster == 1], decided, fix_class)
        _rank(compared, 1)
        for item in compared:
            _decide(item, decided)
        used = [item for item in items if item.used]
        total = sum(item.kept for item in compared)
        share = sum(item.kept for item in compared if item.cluster == 1) / total if total else 0.0
        agreeing = len({item.root for item in compared if item.cluster == 1})
        clusters = len({item.cluster for item in compared})
        open_question = clusters > 1 and not (share >= DECIDING_SHARE and agreeing >= DECIDING_INDEPENDENT)
        if any(decided.get(item.number, (False, ""))[0] for item in used):
            open_question = False  # the operator has named the right one, with a reason
        half_width = _half_width(compared) if open_question else None
        numbers = [item.number for item in used]
        every, far = looked_at.get(tuple(numbers)) or self._apart(screened, numbers, fix_class)
        codes = _final_codes(screened, items)
        rows = rows_of(every.where(far))
        codes[rows[codes[rows] == 0]] = OUTLIER
        blocks = every.where(~far)
        kept = np.bincount(
            blocks.column("initialisation"), weights=blocks.column("count"), minlength=1 + max(numbers, default=0)
        )
        for item in used:
            item.kept = int(kept[item.number])
        _offsets(items, blocks)
        return Judgement(items, codes, fix_class, clusters, share, agreeing, half_width, blocks, every)

    def _look_again(
        self, screened: Screened, leading: list[Judged], decided: Decisions, fix_class: ClassOfFix
    ) -> dict[tuple[int, ...], tuple[Blocks, NDArray[np.bool_]]]:
        """Give those of the leading cluster that the others of it speak against clusters of their own.

        Returns what was asked of `apart` for it, by numbers: as a rule nothing is found and it serves again.
        """
        if len(leading) < LEAST_TO_LOOK_AGAIN:
            return {}
        numbers = [item.number for item in leading]
        every, far = self._apart(screened, numbers, fix_class)
        for cluster, number in enumerate(
            wrong_ones(every.where(~far), fix_class), start=len(screened.initialisations) + 1
        ):
            if not decided.get(number, (False, ""))[0]:
                next(item for item in leading if item.number == number).cluster = cluster
        return {tuple(numbers): (every, far)}

    def _apart(self, screened: Screened, numbers: list[int], fix_class: ClassOfFix) -> tuple[Blocks, NDArray[np.bool_]]:
        """Blocks of the used initialisations, and which of them lie apart."""
        every = screened.blocks.of_initialisations(numbers)
        if screened.frame is None or not numbers:
            return every, np.zeros(len(every), dtype=np.bool_)
        sums = [screened.initialisations[number] for number in numbers]
        raised, _ = with_receiver_estimate(fix_class, *median_gst_m(sums))
        frame = screened.frame
        return every, apart(every, raised.sigma_enu_m, lambda: steps_m(sums, frame))

    def _judged(self, screened: Screened, sums: list[InitialisationSums], fix_class: ClassOfFix) -> list[Judged]:
        numbers = screened.blocks.column("initialisation")
        items: list[Judged] = []
        for item in sums:
            key = (item.number, screened.blocks.block_s, item.kept, fix_class.name)
            if key not in self._places:
                self._places[key] = place_of(screened.blocks.where(numbers == item.number), fix_class)
            root = screened.root_of[item.number]
            items.append(
                Judged(item.number, item.first_ms, item.last_ms, item.kept, item.independent, self._places[key], root)
            )
        return items


def place_of(blocks: Blocks, fix_class: ClassOfFix) -> Place:
    """Median of the block means, and u from these blocks alone at the class's correlation time."""
    means = blocks.means_m()
    places, sigmas = [], []
    for axis in range(3):
        values = means[:, axis][np.isfinite(means[:, axis])]
        bins = blocks.bins(axis)
        if bins is None or values.size == 0:
            places.append(float("nan"))
            sigmas.append(float("nan"))
            continue
        places.append(float(np.median(values)))
        sigmas.append(short_uncertainty_m(bins.without_thin(), fix_class.sigma_enu_m[axis], fix_class.correlation_s))
    return Place((places[0], places[1], places[2]), (sigmas[0], sigmas[1], sigmas[2]))


def _admitted(item: Judged, decided: Decisions) -> bool:
    used, reason = decided.get(item.number, (None, ""))
    if used is False:
        item.code, item.reason = "operator", reason or "set aside by the operator"
        return False
    if item.kept < LEAST_EPOCHS and used is None:
        item.code, item.reason = "initialisation", f"fewer than {LEAST_EPOCHS} epochs"
        return False
    return True


def tolerances_m(fix_class: ClassOfFix) -> tuple[float, float]:
    """Least tolerance (horizontal, vertical) of two initialisations of this class, metres."""
    by_class = (CLASS_TOLERANCE[0] * fix_class.horizontal_m, CLASS_TOLERANCE[1] * fix_class.vertical_m)
    if fix_class.is_rtk_fixed:
        return max(RTK_TOLERANCE_M[0], by_class[0]), max(RTK_TOLERANCE_M[1], by_class[1])
    return by_class


def _labels(compared: list[Judged], fix_class: ClassOfFix) -> list[int]:
    """Clusters; at the largest tolerance where only that decides the question and leaves another cluster apart."""
    places = [item.place for item in compared]
    labels = _clusters(places, fix_class)
    if len(set(labels)) < 3 or _decides(compared, labels):
        return labels
    wider = _clusters(places, fix_class, widest=True)
    return wider if len(set(wider)) > 1 and _decides(compared, wider) else labels


def _decides(compared: list[Judged], labels: list[int]) -> bool:
    """Does one cluster hold 60 % of the epochs, with two independent initialisations?"""
    times: Counter[int] = Counter()
    for item, label in zip(compared, labels, strict=True):
        times[label] += item.kept
    largest, kept = times.most_common(1)[0]
    roots = {item.root for item, label in zip(compared, labels, strict=True) if label == largest}
    return kept >= DECIDING_SHARE * times.total() and len(roots) >= DECIDING_INDEPENDENT


def _clusters(places: list[Place], fix_class: ClassOfFix, *, widest: bool = False) -> list[int]:
    """Single linkage by a breadth-first walk; one vectorised row at a time, memory O(n)."""
    if not places:
        return []
    enu = np.array([place.enu_m for place in places])
    u = np.array([place.u_enu_m for place in places])
    spread = np.column_stack([np.maximum(u[:, 0], u[:, 1]), u[:, 2]])
    labels = np.zeros(len(places), dtype=np.int64)
    for seed in range(len(places)):
        if labels[seed]:
            continue
        label = int(labels.max()) + 1
        labels[seed] = label
        queue = [seed]
        while queue:
            here = queue.pop()
            near = np.flatnonzero(_linked(enu, spread, here, fix_class, widest=widest) & (labels == 0))
            labels[near] = label
            queue += [int(row) for row in near]
    return [int(label) for label in labels]


def _linked(
    enu: Floats, spread: Floats, here: int, fix_class: ClassOfFix, *, widest: bool = False
) -> NDArray[np.bool_]:
    gap = enu - enu[here]
    u_d = np.hypot(spread, spread[here])
    distance = np.column_stack([np.hypot(gap[:, 0], gap[:, 1]), np.abs(gap[:, 2])])
    linked = np.ones(len(enu), dtype=np.bool_)
    for axis, least in enumerate(tolerances_m(fix_class)):
        most = least * MOST_OF_TOLERANCE[axis]
        tolerance = np.clip(most if widest else UNCERTAINTIES * u_d[:, axis], least, most)
        # without a height on either side nothing vertical speaks against it
        linked &= ~(distance[:, axis] > np.where(np.isnan(tolerance), least, tolerance))
    return linked


def _leading(compared: list[Judged], decided: Decisions) -> int:
    named = [item for item in compared if decided.get(item.number, (False, ""))[0]]
    times: dict[int, int] = {}
    for item in named or compared:
        times[item.cluster] = times.get(item.cluster, 0) + item.kept
    # of equal ones the earlier: a fixed rule, so that two reductions agree
    return min(times, key=lambda label: (-times[label], label)) if times else 0


def _rank(compared: list[Judged], leading: int) -> None:
    """Renumber clusters: 1 = the leading one, the others in order of appearance."""
    order = [leading, *[item.cluster for item in compared if item.cluster != leading]]
    rank = {label: number for number, label in enumerate(dict.fromkeys(order), start=1)}
    for item in compared:
        item.cluster = rank[item.cluster]


def _decide(item: Judged, decided: Decisions) -> None:
    used, reason = decided.get(item.number, (None, ""))
    if used or item.cluster == 1:
        item.used, item.reason = True, reason
        return
    item.code, item.reason = "initialisation", "lies elsewhere than the leading initialisations"


def _offsets(items: list[Judged], blocks: Blocks) -> None:
    if not len(blocks):
        return
    mean = mean_of(blocks)
    for item in items:
        gaps = [place - centre for place, centre in zip(item.place.enu_m, mean, strict=True)]
        item.offset_enu_m = (gaps[0], gaps[1], gaps[2] if np.isfinite(gaps[2]) else None)


def mean_of(blocks: Blocks) -> tuple[float, float, float]:
    """Plain mean of all epochs in the blocks, metres; up NaN without heights."""
    means, counts = blocks.means_m(), blocks.column("count")
    heights = blocks.column("count_up")
    up = float(np.average(means[heights > 0, 2], weights=heights[heights > 0])) if heights.any() else float("nan")
    return float(np.average(means[:, 0], weights=counts)), float(np.average(means[:, 1], weights=counts)), up


def _half_width(compared: list[Judged]) -> tuple[float, float, float]:
    """Largest distance, per axis, from the leading cluster's centre to the centre of another."""
    centres: list[Floats] = []
    for label in sorted({item.cluster for item in compared}):
        members = [item for item in compared if item.cluster == label]
        places = np.array([item.place.enu_m for item in members])
        centres.append(np.average(places, axis=0, weights=[item.kept for item in members]))
    gaps = np.nan_to_num(np.abs(np.array(centres[1:]) - centres[0])).max(axis=0)
    return float(gaps[0]), float(gaps[1]), float(gaps[2])


def _final_codes(screened: Screened, items: list[Judged]) -> NDArray[np.uint8]:
    codes = screened.codes.copy()
    for item in items:
        if not item.used:
            codes[(screened.initialisation == item.number) & (codes == 0)] = CODE_NUMBER[item.code]
    return codes
