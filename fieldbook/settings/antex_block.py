"""One antenna block of an ANTEX file, read to its last number: fixed columns, millimetres to metres.

Every line of the block is accounted for: a label this reader does not know, a row that is too short, a number that is
none, a frequency that does not end is an error with its line.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from datetime import datetime, timedelta

from fieldbook.errors import UsageError
from fieldbook.model.calibration import AntennaCalibration, FrequencyCalibration, NeuM

MOST_FREQUENCIES = 64
MOST_ZENITHS = 181
MOST_AZIMUTHS = 721
MOST_MM = 1000.0  # a phase centre a metre away is no phase centre


class AntexError(UsageError):
    """Not as ANTEX 1.4 says; the text names file and line."""

    default_code = "antex"


def shown(line: str) -> str:
    """` ("the line")`, cut."""
    text = " ".join(line.split())
    return f' ("{text[:40]}{"..." if len(text) > 40 else ""}")' if text else ""


@dataclass
class Lines:
    """Lines with their numbers in the file."""

    name: str
    first: int
    held: list[str]
    at: int = -1

    def next(self) -> str | None:
        """The next line, or None at the end."""
        self.at += 1
        return self.held[self.at] if self.at < len(self.held) else None

    def wrong(self, what: str, remedy: str = "The file is damaged or not ANTEX 1.4; fetch it again.") -> AntexError:
        """The error for the line read last."""
        line = self.held[self.at] if self.at < len(self.held) else ""
        number = self.first + min(self.at, len(self.held))
        return AntexError(f"{self.name}, line {number}: {what}{shown(line)}.", remedy)


@dataclass
class _Block:
    keys: dict[str, str] = field(default_factory=dict)
    zenith_deg: tuple[float, ...] = ()
    azimuths: int = 0  # rows that DAZI promises; 0 = none
    dazi_deg: float = 0.0
    counted: int | None = None
    frequencies: list[FrequencyCalibration] = field(default_factory=list)
    rms: dict[str, NeuM] = field(default_factory=dict)


_ONCE = {
    "TYPE / SERIAL NO",
    "METH / BY / # / DATE",
    "DAZI",
    "ZEN1 / ZEN2 / DZEN",
    "# OF FREQUENCIES",
    "VALID FROM",
    "VALID UNTIL",
    "SINEX CODE",
}


def parse_lines(lines: Lines) -> AntennaCalibration:
    """The calibration in the lines from START OF ANTENNA to END OF ANTENNA.

    Raises:
        AntexError: with the line.
    """
    if (lines.next() or "")[60:80].strip() != "START OF ANTENNA":
        raise lines.wrong("a block begins with START OF ANTENNA")
    block = _Block()
    while (line := lines.next()) is not None:
        label = line[60:80].strip()
        if label == "END OF ANTENNA":
            return _made(lines, block)
        if label == "START OF FREQUENCY":
            _frequency(lines, block, line)
        elif label == "START OF FREQ RMS":
            _rms(lines, block, line)
        elif label in _ONCE:
            if label in block.keys:
                raise lines.wrong(f"{label} stands twice")
            block.keys[label] = line
            if label in _READERS:
                _READERS[label](lines, block, line)
        elif label != "COMMENT":
            raise lines.wrong("no line of an antenna")
    raise lines.wrong("the antenna does not end")


def _number(lines: Lines, text: str, what: str, most: float) -> float:
    try:
        # int() and float() take underscores, which no FORTRAN writes
        value = float(text.strip() if "_" not in text else "")
    except ValueError:
        raise lines.wrong(f'{what} is no number, "{text.strip()[:12]}"') from None
    if not math.isfinite(value) or abs(value) > most:
        raise lines.wrong(f"{what} is {text.strip()[:12]}, out of all range")
    return value


def _whole(lines: Lines, text: str, what: str, most: int) -> int:
    text = text.strip()
    if not (text.isascii() and text.isdigit()) or len(text) > 6 or int(text) > most:
        raise lines.wrong(f'{what} is no whole number up to {most}, "{text[:12]}"')
    return int(text)


def _dazi(lines: Lines, block: _Block, line: str) -> None:
    step = _number(lines, line[2:8], "DAZI", 360.0)
    if step == 0:
        return
    rows = round(360.0 / step) if step > 0 else 0
    if rows < 1 or rows >= MOST_AZIMUTHS or abs(rows * step - 360.0) > 1e-6:
        raise lines.wrong("DAZI does not divide the circle")
    block.azimuths, block.dazi_deg = rows + 1, step


def _zeniths(lines: Lines, block: _Block, line: str) -> None:
    first, last, step = (_number(lines, line[at : at + 6], "ZEN1 / ZEN2 / DZEN", 180.0) for at in (2, 8, 14))
    count = round((last - first) / step) + 1 if step > 0 else 0
    if not 2 <= count <= MOST_ZENITHS or abs(first + (count - 1) * step - last) > 1e-6 or not 0 <= first < last <= 180:
        raise lines.wrong("ZEN1, ZEN2 and DZEN make no row of zenith angles")
    block.zenith_deg = tuple(first + index * step for index in range(count))


def _count(lines: Lines, block: _Block, line: str) -> None:
    block.counted = _whole(lines, line[:6], "# OF FREQUENCIES", MOST_FREQUENCIES)


_READERS: dict[str, Callable[[Lines, _Block, str], None]] = {
    "DAZI": _dazi,
    "ZEN1 / ZEN2 / DZEN": _zeniths,
    "# OF FREQUENCIES": _count,
}


def _code(lines: Lines, line: str) -> str:
    system, number = line[3:4], line[4:6].strip()
    if system == " ":
        system = "G"  # blank means GPS
    if not (system.isascii() and system.isalpha() and system.isupper() and number.isascii() and number.isdigit()):
        raise lines.wrong("no frequency code such as G01")
    return f"{system}{int(number):02d}"


def _offset(lines: Lines, line: str) -> NeuM:
    north, east, up = (
        _number(lines, line[at : at + 10], name, MOST_MM) / 1000.0
        for at, name in ((0, "NORTH"), (10, "EAST"), (20, "UP"))
    )
    return north, east, up


def _row(lines: Lines, line: str, count: int) -> tuple[float, ...]:
    """`count` values of eight columns after the first eight."""
    if len(line) > 8 + 8 * count:
        raise lines.wrong(f"more than the {count} values that ZEN1 / ZEN2 / DZEN promise")
    cells = [line[at : at + 8] for at in range(8, 8 + 8 * count, 8)]
    if not cells[-1].strip():
        raise lines.wrong(f"fewer than the {count} values that ZEN1 / ZEN2 / DZEN promise")
    return tuple(_number(lines, cell, "a variation", MOST_MM) / 1000.0 for cell in cells)


def _frequency(lines: Lines, block: _Block, start: str) -> None:
    code = _code(lines, start)
    if any(item.code == code for item in block.frequencies):
        raise lines.wrong(f"frequency {code} stands twice")
    if len(block.frequencies) >= MOST_FREQUENCIES:
        raise lines.wrong(f"more than {MOST_FREQUENCIES} frequencies")
    if not block.zenith_deg or "DAZI" not in block.keys:
        raise lines.wrong("a frequency before DAZI and ZEN1 / ZEN2 / DZEN")
    offset: NeuM | None = None
    noazi: tuple[float, ...] | None = None
    azimuths, grid = list[float](), list[tuple[float, ...]]()
    count = len(block.zenith_deg)
    while (line := lines.next()) is not None:
        label = line[60:80].strip()
        if label == "END OF FREQUENCY":
            if _code(lines, line) != code:
                raise lines.wrong(f"frequency {code} ends as another one")
            break
        if label == "NORTH / EAST / UP":
            if offset is not None:
                raise lines.wrong("NORTH / EAST / UP stands twice")
            offset = _offset(lines, line)
        elif label == "COMMENT":
            continue
        elif label in ("END OF ANTENNA", "START OF FREQUENCY", "START OF ANTENNA"):
            raise lines.wrong(f"frequency {code} does not end")
        elif line[3:8] == "NOAZI":
            if noazi is not None:
                raise lines.wrong("NOAZI stands twice")
            noazi = _row(lines, line, count)
        else:
            azimuth = _number(lines, line[:8], "the azimuth of a row", 360.0)
            if len(azimuths) >= block.azimuths or abs(azimuth - len(azimuths) * block.dazi_deg) > 1e-6:
                raise lines.wrong("a row of an azimuth that DAZI does not promise here")
            azimuths.append(azimuth)
            grid.append(_row(lines, line, count))
    else:
        raise lines.wrong(f"frequency {code} does not end")
    if offset is None or noazi is None:
        raise lines.wrong(f"frequency {code} lacks {'NORTH / EAST / UP' if offset is None else 'NOAZI'}")
    if len(azimuths) != block.azimuths:
        raise lines.wrong(f"frequency {code} has {len(azimuths)} of the {block.azimuths} azimuths that DAZI promises")
    block.frequencies.append(FrequencyCalibration(code, offset, noazi, tuple(azimuths), tuple(grid)))


def _rms(lines: Lines, block: _Block, start: str) -> None:
    """The block of root mean squares: only that of the offset is kept."""
    code = _code(lines, start)
    while (line := lines.next()) is not None:
        label = line[60:80].strip()
        if label == "END OF FREQ RMS":
            return
        if label in ("END OF ANTENNA", "START OF FREQUENCY", "START OF ANTENNA"):
            break
        if label == "NORTH / EAST / UP":
            block.rms[code] = _offset(lines, line)
    raise lines.wrong(f"the rms of frequency {code} does not end")


def _instant(lines: Lines, block: _Block, label: str) -> str | None:
    line = block.keys.get(label)
    if line is None or not line[:43].strip():
        return None
    year, month, day, hour, minute = (_whole(lines, line[at : at + 6], label, 9999) for at in range(0, 30, 6))
    seconds = _number(lines, line[30:43], label, 60.0)
    try:
        # 59.9999999 s, the usual end of a day, is the next full second
        found = datetime(year, month, day, hour, minute) + timedelta(seconds=round(seconds))  # noqa: DTZ001 - as stated
        return found.isoformat()
    except (ValueError, OverflowError):
        raise lines.wrong(f"{label} is no date") from None


def _made(lines: Lines, block: _Block) -> AntennaCalibration:
    for label in ("TYPE / SERIAL NO", "DAZI", "ZEN1 / ZEN2 / DZEN"):
        if label not in block.keys:
            raise lines.wrong(f"the antenna has no {label}")
    if not block.frequencies:
        raise lines.wrong("the antenna has no frequency")
    if block.counted is not None and block.counted != len(block.frequencies):
        raise lines.wrong(f"the antenna has {len(block.frequencies)} frequencies, its head promises {block.counted}")
    kind, method = block.keys["TYPE / SERIAL NO"], block.keys.get("METH / BY / # / DATE", "")
    individuals = method[40:46].strip()
    return AntennaCalibration(
        antenna=" ".join(kind[:16].split()),
        radome=kind[16:20].strip(),
        serial=kind[20:40].strip(),
        method=method[:20].strip(),
        agency=method[20:40].strip(),
        individuals=_whole(lines, individuals, "the number of antennas", 999_999) if individuals else None,
        date=method[50:60].strip(),
        sinex_code=block.keys.get("SINEX CODE", "")[:10].strip(),
        valid_from=_instant(lines, block, "VALID FROM"),
        valid_until=_instant(lines, block, "VALID UNTIL"),
        zenith_deg=block.zenith_deg,
        frequencies=tuple(
            FrequencyCalibration(
                item.code, item.offset_neu_m, item.noazi_m, item.azimuths_deg, item.grid_m, block.rms.get(item.code)
            )
            for item in block.frequencies
        ),
    )
