"""The result of a reduction: the tree of `fieldbook reduce --json` as dataclasses, field for field.

Units as in the names; angles in degrees, positive north, east and clockwise; u = one standard uncertainty;
None = not known (never NaN); dof None = infinite. lat/lon/h and x/y/z are of the MARK. Numbers are never rounded
here: rounding is the last step, in `model.rounding`.
"""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass, field
from typing import Any

from fieldbook.model.local_grid import LocalPosition

Vector = list[float]


@dataclass
class Finding:
    """One thing the operator must know, with its figures and one sentence of what to do."""

    code: str
    severity: str  # "info", "caution", "stop"
    text: str
    figures: dict[str, Any] = field(default_factory=dict)


@dataclass
class Initialisation:
    """One run of epochs with one ambiguity solution (or simply without interruption, for other qualities)."""

    number: int
    from_utc: str | None
    to_utc: str | None
    kept: int
    used: bool
    offset_enu_m: list[float | None] | None  # from the mean of the used ones
    independent: bool = True  # False: 'resumed', a split without loss of fix
    reason: str = ""  # why not used
    u_enu_m: Vector | None = None

    def to_json(self) -> dict[str, Any]:
        """With the contract's key names `from` and `to`."""
        tree = dataclasses.asdict(self)
        tree["from"] = tree.pop("from_utc")
        tree["to"] = tree.pop("to_utc")
        return tree


@dataclass
class Geodetic:
    """A position that cannot be without frame and epoch."""

    frame: str  # "EPSG:7912"
    frame_name: str
    epoch: float | None  # decimal year; None if the frame is static
    lat_deg: float
    lon_deg: float
    h_m: float | None


@dataclass
class ClientPosition:
    frame: str
    frame_name: str
    epoch: float | None
    lat_deg: float
    lon_deg: float
    h_m: float | None
    x_m: float | None
    y_m: float | None
    z_m: float | None


@dataclass
class GridPosition:
    crs: str
    crs_name: str
    easting_m: float
    northing_m: float
    convergence_deg: float  # azimuth = grid bearing + convergence
    scale_factor: float
    elevation_factor: float | None
    combined_factor: float | None
    zone_text: str = ""


@dataclass
class Height:
    """Height by a geoid model, H = h - N."""

    model: str
    model_name: str
    model_sha256: str
    model_frame: str
    datum: str | None  # a vertical datum, or None: 'height above geoid model ...'
    undulation_m: float
    undulation_u_m: float | None
    orthometric_m: float
    vertical95_m: float | None
    heading: str = ""


@dataclass
class ReadingReduced:
    """One height reading with what it means."""

    method: str
    value: str  # digits as typed
    unit: str
    when: str
    value_m: float
    arp_m: float
    sigma_m: float
    at: str | None = None
    reader: str | None = None
    time: str | None = None
    seq: int | None = None
    tape_offset_m: float | None = None  # added to value_m; None: none stated


@dataclass
class AntennaHeight:
    height_arp_m: float | None
    height_u_m: float | None
    reported_point: str
    readings: list[ReadingReduced] = field(default_factory=list)
    before_m: float | None = None
    during_m: float | None = None
    after_m: float | None = None
    reading_sigma_assumed: bool = False
    phase_centre: dict[str, Any] | None = None  # a calibration and what was made of it; None: no calibration


@dataclass
class BudgetLine:
    source: str
    type: str  # "A" or "B"
    distribution: str  # "t", "normal", "rectangular", "as stated"
    u_enu_m: list[float | None]
    dof: float | None
    common: bool
    note: str = ""


@dataclass
class Ellipse95:
    major_m: float  # SEMI-axes
    minor_m: float
    azimuth_deg: float  # of the major axis, from true north, 0 <= a < 180


@dataclass
class Uncertainty:
    u_enu_m: list[float | None]
    cov_en_m2: list[Vector]
    dof_enu: list[float | None]
    k95_enu: list[float | None]
    ellipse95: Ellipse95
    horizontal95_m: float
    vertical95_m: float | None
    correlation_time_s: float | None
    governed_by: str  # "class", "class and data", "data"
    method: str
    budget: list[BudgetLine]
    common: list[str] | None = None  # uncertainty_client: which terms are common to all marks


@dataclass
class OperationStep:
    authority: str
    code: str
    name: str
    accuracy_m: float | None  # None never appears in an accepted operation; 0.0 = by definition
    inverse: bool = False
    remark: str = ""


@dataclass
class GridFile:
    name: str
    sha256: str


@dataclass
class Operation:
    name: str
    steps: list[OperationStep]
    coordinate_epoch: float | None
    area_ok: bool
    grids: list[GridFile]
    accuracy_m: float | None = None  # linear sum, for choosing and for the limit
    shift_enu_m: Vector | None = None


@dataclass
class LeaveLine:
    """One line of the leave check. `line` is the requirement's key name."""

    line: str
    scope: str  # "set-up" or "mark"
    wanted: float | str | None
    have: float | str | None
    unit: str
    met: bool
    time_to_go_s: float | None
    text: str


@dataclass
class Leave:
    verdict: str  # "not yet", "good to leave", "cannot reach"
    lines: list[LeaveLine]


@dataclass
class Reduction:
    mark: str
    occupation: int
    open: bool
    ended_by: str | None
    started: str | None  # first kept epoch
    ended: str | None  # last kept epoch
    heard_from: str | None
    heard_to: str | None
    kept_s: float
    heard: int
    kept: int
    without_height: int
    set_aside: dict[str, int]
    initialisations: list[Initialisation]
    receiver: Geodetic
    client: ClientPosition | None
    grid: GridPosition | None
    height: Height | None
    antenna: AntennaHeight
    uncertainty: Uncertainty
    uncertainty_client: Uncertainty | None
    operation: Operation
    findings: list[Finding] = field(default_factory=list)
    leave: Leave | None = None
    epoch_of_observation: float | None = None  # decimal year of the mean UTC of the kept epochs
    local: list[LocalPosition] = field(default_factory=list)  # in the book's local grids of the client's frame

    def to_json(self) -> dict[str, Any]:
        """The tree R of `fieldbook reduce --json` (contract, section 3): finite numbers or null."""
        tree = {item.name: _plain(getattr(self, item.name)) for item in dataclasses.fields(self)}
        tree["epochs"] = {key: tree.pop(key) for key in ("heard", "kept", "without_height", "set_aside")}
        tree["initialisations"] = [_finite(item.to_json()) for item in self.initialisations]
        return tree


def _plain(value: Any) -> Any:
    return (
        _finite(dataclasses.asdict(value))
        if dataclasses.is_dataclass(value) and not isinstance(value, type)
        else ([_plain(item) for item in value] if isinstance(value, list) else _finite(value))
    )


def _finite(value: Any) -> Any:
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    if isinstance(value, dict):
        return {key: _finite(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_finite(item) for item in value]
    return value


@dataclass
class Trace:
    """What the figures of a screen or a certificate draw: kept and set-aside epochs about the mean. Plain lists.

    Thinned by the maker to at most `limit` points; positions in metres east, north, up of the reduced mean of the
    antenna's reported point.
    """

    time_s: Vector  # seconds since the first heard epoch
    east_m: Vector
    north_m: Vector
    up_m: list[float | None]
    kept: list[bool]
    initialisation: list[int]
    step: int = 1  # every step-th epoch is here


@dataclass
class Independence:
    """How far two occupations of a mark stand apart. Keys of `marks[].repeats[].independence`:

    grade           "independent", "partly independent" or "not independent"
    hours_apart     end of the earlier to start of the later one
    sky_apart_h     the same on a dial of one repeat of the GPS sky (86 153 s): 0 = the same satellites in the same places
    hours_wanted    what both are held against
    changed, same   what differs and what does not: "antenna height", "tribrach", "antenna", "observer", "station",
                    "receiver"
    not_known       what was not stated
    text            one sentence
    """

    grade: str
    hours_apart: float | None
    sky_apart_h: float | None
    hours_wanted: float
    changed: list[str]
    same: list[str]
    not_known: list[str]
    text: str


@dataclass
class Repeat:
    """Two occupations of a mark against each other. Keys of `marks[].repeats[]`:

    first, second            occupation numbers; the difference is second minus first
    difference_enu_m         metres east, north, up; up null when one has no height
    plan_m                   its horizontal length
    u_enu_m, dof_enu         of the difference: what both share has dropped out; dof null = infinite
    plan_significance        probability of a larger plan difference if nothing is wrong (F)
    height_significance      the same in height (t, two-sided)
    level                    what a significance is held against: 0.05 shared by all tests of the mark
    plan_tolerance_m, height_tolerance_m    the fixed tolerances
    agrees                   false when one of the tests is not passed
    text                     one sentence
    """

    first: int
    second: int
    difference_enu_m: list[float | None]
    plan_m: float
    u_enu_m: list[float | None]
    dof_enu: list[float | None]
    plan_significance: float
    height_significance: float | None
    level: float
    plan_tolerance_m: float
    height_tolerance_m: float
    agrees: bool
    text: str
    independence: Independence


@dataclass
class MarkOccupation:
    """One combined occupation. Keys of `marks[].used[]`:

    occupation, open, fix_class, kept_s
    weight_enu               share per axis; each axis sums to one over the mark, 0 where it has no part
    residual_enu_m           this occupation minus the combined mark
    residual_u_enu_m         standard uncertainty of that difference
    plan_significance, height_significance   probability of a larger residual if nothing is wrong
    """

    occupation: int
    open: bool
    fix_class: str
    kept_s: float
    weight_enu: list[float]
    residual_enu_m: list[float | None]
    residual_u_enu_m: list[float | None]
    plan_significance: float
    height_significance: float | None


@dataclass
class NotCombined:
    """An occupation left out. Keys of `marks[].not_combined[]`: occupation, code, text (why, and what to do)."""

    occupation: int
    code: str
    text: str


@dataclass
class MarkResult:
    """All occupations of one mark in one book. Keys of `marks[]` in `fieldbook reduce --json`:

    mark
    occupations              numbers of all its occupations, also of those that could not be reduced
    used                     those that are combined (one alone included), see MarkOccupation
    not_combined             those that are not, each with its reason
    odd_one                  the occupation that disagrees with all others, if one can be named, else null
    started, ended           first and last kept epoch of the used ones
    kept_s                   sum over the used ones
    receiver_frame           frame all used ones were observed in
    client, grid, height     as in a reduction, of the combined mark; null when there is no common position
    uncertainty              U of the mark as measured, without the frame operation
    uncertainty_client       U with the frame operation, in the client's frame; null without client
    repeats                  every pair of used ones, see Repeat
    findings                 of the mark as a whole; those of the occupations stay with them
    leave                    the mark's own verdict: lines of scope "mark" on the combined figures
    local                    the combined mark in the book's local grids of the client's frame
    """

    mark: str
    occupations: list[int]
    used: list[MarkOccupation]
    not_combined: list[NotCombined]
    odd_one: int | None
    started: str | None
    ended: str | None
    kept_s: float
    receiver_frame: str | None
    client: ClientPosition | None
    grid: GridPosition | None
    height: Height | None
    uncertainty: Uncertainty | None
    uncertainty_client: Uncertainty | None
    repeats: list[Repeat] = field(default_factory=list)
    findings: list[Finding] = field(default_factory=list)
    leave: Leave | None = None
    local: list[LocalPosition] = field(default_factory=list)

    def to_json(self) -> dict[str, Any]:
        """The tree of one element of `marks`: finite numbers or null."""
        return {item.name: _plain(getattr(self, item.name)) for item in dataclasses.fields(self)}


@dataclass
class Convergence:
    """The running mean of one occupation and its 95 % figures as they would have been printed. Lists of equal length.

    Offsets in metres from the final mean of the reported point. Key `convergence` of a reduction in `reduce --json`.
    """

    times_s: Vector  # seconds since the first heard epoch, as in Trace
    east_m: Vector
    north_m: Vector
    up_m: list[float | None]
    horizontal95_m: Vector
    vertical95_m: list[float | None]
    inside_since: str | None = None  # UTC from which both figures met the requirement without a break, if they do

    def to_json(self) -> dict[str, Any]:
        """Finite numbers or null."""
        tree: dict[str, Any] = _plain(self)
        return tree
