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
