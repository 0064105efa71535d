"""The calibration of one receiver antenna, as an ANTEX 1.4 block states it; metres and degrees.

Offsets run from the antenna reference point (ARP) to the mean phase centre in the antenna's own axes: north is the
direction of its north mark. Variations are added to the distance: observed distance = distance to the mean phase
centre + variation. Zenith angles are counted from the antenna's axis, azimuths from its north mark, clockwise.
"""

from __future__ import annotations

from dataclasses import dataclass

NeuM = tuple[float, float, float]  # north, east, up


@dataclass(frozen=True)
class FrequencyCalibration:
    """One frequency. `noazi_m` has one value per zenith angle; `grid_m` is empty or (azimuths, zenith angles)."""

    code: str  # "G01": system letter and frequency number
    offset_neu_m: NeuM
    noazi_m: tuple[float, ...]
    azimuths_deg: tuple[float, ...] = ()
    grid_m: tuple[tuple[float, ...], ...] = ()
    rms_neu_m: NeuM | None = None  # of the calibration's own observations, where the block states it


@dataclass(frozen=True)
class AntennaCalibration:
    """A block. Empty texts = not stated; a blank serial means the mean of a type."""

    antenna: str  # columns 1 to 16 of the type
    radome: str  # columns 17 to 20
    serial: str
    method: str
    agency: str
    individuals: int | None  # how many antennas were calibrated
    date: str
    sinex_code: str
    valid_from: str | None  # "2027-03-04T00:00:00"
    valid_until: str | None
    zenith_deg: tuple[float, ...]
    frequencies: tuple[FrequencyCalibration, ...]

    @property
    def model(self) -> str:
        """Antenna and radome as in a session's antenna.model."""
        return f"{self.antenna} {self.radome}".strip()

    @property
    def individual(self) -> bool:
        """Of this very antenna, not the mean of its type."""
        return bool(self.serial)

    def frequency(self, code: str) -> FrequencyCalibration | None:
        """The values of a frequency, or None."""
        return next((item for item in self.frequencies if item.code == code), None)


@dataclass(frozen=True)
class FrozenCalibration:
    """A calibration as an occupation keeps it: the block and where it came from."""

    calibration: AntennaCalibration
    file: str
    sha256: str  # of the whole file


def split_model(text: str) -> tuple[str, str]:
    """(antenna, radome) of a type written as in ANTEX (16 + 4 columns) or with one blank before the radome.

    The radome is "" where none is stated; "NONE" is a statement, not a default.
    """
    text = text.rstrip()
    if 16 < len(text) <= 20 and len(text[16:].strip()) == len(text) - 16:
        return " ".join(text[:16].split()), text[16:20].strip()
    head, _, last = text.rpartition(" ")
    if head.strip() and len(last) == 4:
        return " ".join(head.split()), last
    return " ".join(text.split()), ""
