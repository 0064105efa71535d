"""Bytes to frames: where a sentence begins and ends, and whether its checksum holds.

Strategy. A frame begins at any `$` or `!`, wherever it stands, and ends at `*hh`; line ends mean nothing to a
frame that has its checksum. One compiled expression finds the whole frames at C speed; only the gaps between
them are looked at in Python (junk, line ends, TAG blocks, damaged frames). Each frame's XOR is the difference of
two running XORs, and the running XOR of a slice is made by doubling shifts of one big integer, which costs less
than any loop over bytes. Received bytes are worked on in slices of 4096, so that this stays linear.

What is held between two feeds is the beginning of one frame (at most 256 bytes) and the last 128 bytes of text
in front of it (a TAG block may stand there). Where a feed is cut never changes a result.

Byte balance: received = good + damaged + junk + TAG blocks + line ends + pending; each is counted on its own.
"""

from __future__ import annotations

import re
from functools import reduce
from operator import xor
from typing import NamedTuple

LONGEST_FRAME = 256  # `$` to `*hh`; real sentences reach 205 bytes
_LONGEST_TEXT = LONGEST_FRAME - 3
_STANDARD_LENGTH = 82 - 2  # the standard counts CR LF; here it is a statistic only
_SLICE = 4096
_TAIL = 128

_WHOLE = re.compile(rb"([$!][ \"#%%-)+-~]{0,%d}+)\*([0-9A-Fa-f]{2})(?:\r?\n)?" % (_LONGEST_TEXT - 1))
_LINES = re.compile(rb"([$!][ \"#%%-)+-~]{0,%d}+)\*([0-9A-Fa-f]{2})\r\n" % (_LONGEST_TEXT - 1))
_STOP = re.compile(rb"[^ \"#%-)+-~]")  # whatever cannot stand inside a sentence
_START = re.compile(rb"[$!]")
_TAG = re.compile(rb"\\([^\\\r\n]*)\*([0-9A-Fa-f]{2})\\\Z")
_HEX_DIGITS = b"0123456789abcdefABCDEF"
_HEX = {bytes([a, b]): int(bytes([a, b]), 16) for a in _HEX_DIGITS for b in _HEX_DIGITS}

BAD_CHECKSUM = "bad_checksum"
NO_CHECKSUM = "no_checksum"
BAD_BYTES = "bad_bytes"
TRUNCATED = "truncated"
TOO_LONG = "too_long"

_new = tuple.__new__  # a third of the time of the constructor of a named tuple


class Frame(NamedTuple):
    """One sentence whose checksum holds, or that ended at a line end without one (`checksum` is then empty)."""

    text: bytes  # from `$` or `!` to before the `*`, printable ASCII
    checksum: bytes  # the two hexadecimal digits as received, b"" = missing
    tag: str | None = None  # source named by the TAG block in front of it

    @property
    def raw(self) -> bytes:
        """The frame as received."""
        return self.text + b"*" + self.checksum if self.checksum else self.text

    @property
    def fields(self) -> list[str]:
        """The fields as text; the first is the address."""
        return str(self.text[1:], "ascii").split(",")

    @property
    def address(self) -> str:
        """Talker and type: `GNGGA`."""
        return str(self.text[1:].partition(b",")[0], "ascii")

    @property
    def talker(self) -> str:
        """First two characters of the address; `P` for a proprietary sentence."""
        address = self.address
        return "P" if address[:1] == "P" and address not in ("PQGSV", "PQGSA") else address[:2]

    @property
    def type(self) -> str:
        """What follows the talker."""
        return self.address[len(self.talker) :]


class Damaged(NamedTuple):
    """Bytes that began like a sentence and cannot be used."""

    raw: bytes
    kind: str  # BAD_CHECKSUM, BAD_BYTES, TRUNCATED or TOO_LONG


Plain = Frame | Damaged | tuple[bytes, bytes]


class Framer:
    """Finds the frames in a stream of received bytes. Never raises, whatever the bytes."""

    def __init__(self) -> None:
        self.counts: dict[str, int] = dict.fromkeys(
            ("good", BAD_CHECKSUM, NO_CHECKSUM, BAD_BYTES, TRUNCATED, TOO_LONG, "over_82", "bad_tag"), 0
        )
        self.received_bytes = 0
        self.good_bytes = 0
        self.damaged_bytes = 0  # frames without checksum included
        self.junk_bytes = 0
        self.tag_bytes = 0
        self.line_end_bytes = 0
        self.all_good = True  # of the latest feed: nothing damaged, no checksum missing
        self._pending = b""
        self._tail = b""

    @property
    def good(self) -> int:
        """Frames whose checksum held."""
        return self.counts["good"]

    @property
    def pending_bytes(self) -> int:
        """Bytes of the frame that has begun and not ended."""
        return len(self._pending)

    def feed(self, data: bytes) -> list[Frame | Damaged]:
        """The frames that end in these bytes, whole and damaged, in their order."""
        return [one if isinstance(one, (Frame, Damaged)) else Frame(*one) for one in self.feed_plain(data)]

    def feed_plain(self, data: bytes) -> list[Plain]:
        """The same for the decoder: a whole frame may be a bare (text, checksum), which costs less to make."""
        self.received_bytes += len(data)
        self.all_good = True
        found: list[Plain] = []
        if len(data) <= _SLICE:
            self._feed(data, found)
        else:
            for start in range(0, len(data), _SLICE):
                self._feed(data[start : start + _SLICE], found)
        return found

    def finish(self) -> list[Damaged]:
        """End of the stream: a frame that has begun and not ended is truncated, never parsed."""
        pending, self._pending, self._tail = self._pending, b"", b""
        if not pending:
            return []
        self.counts[TRUNCATED] += 1
        self.damaged_bytes += len(pending)
        return [Damaged(pending, TRUNCATED)]

    def reset(self) -> list[Damaged]:
        """The stream was interrupted: halves from before and after are never joined."""
        return self.finish()

    def _feed(self, data: bytes, found: list[Plain]) -> None:
        pending = self._pending
        if pending:
            if len(pending) + len(data) <= _LONGEST_TEXT and b"*" not in pending and not _STOP.search(data):
                self._pending = pending + data
                return
            data = pending + data
            self._pending = b""
        running = _running_xor(data)
        position = 0
        if not self._tail:
            lines_end = data.rfind(b"\r\n") + 2
            if lines_end > 2 and self._only_good_lines(data, lines_end, running, found):
                position = lines_end
                if position == len(data):
                    return
        good_bytes = good = over = line_ends = 0
        value_of = _HEX
        append = found.append
        for match in _WHOLE.finditer(data, position):
            start, end = match.span(1)
            if start != position:
                self._gap(data, position, start, found)
            text, checksum = match.groups()
            tag = self._take_tag() if self._tail else None
            position = match.end()
            length = end + 3 - start
            line_ends += position - end - 3
            if running[end - 1] ^ running[start] == value_of[checksum]:
                good += 1
                good_bytes += length
                if length > _STANDARD_LENGTH:
                    over += 1
                append(_new(Frame, (text, checksum, tag)))
            else:
                self._damage(BAD_CHECKSUM, data[start : end + 3], found)
        self.counts["good"] += good
        self.counts["over_82"] += over
        self.good_bytes += good_bytes
        self.line_end_bytes += line_ends
        if position < len(data):
            self._gap(data, position, len(data), found)

    def _only_good_lines(self, data: bytes, limit: int, running: bytes, found: list[Plain]) -> bool:
        """The usual case: sentences with their line ends and nothing else. False = no, and nothing was done."""
        position = over = 0
        value_of = _HEX
        lines = _LINES.findall(data, 0, limit)
        for text, checksum in lines:
            length = len(text)
            end = position + length
            if end > limit or running[end - 1] ^ running[position] != value_of[checksum]:
                return False
            if length > _STANDARD_LENGTH - 3:
                over += 1
            position = end + 5
        if position != limit:  # the lengths add up only if the lines stand end to end
            return False
        found += lines
        self.counts["good"] += len(lines)
        self.counts["over_82"] += over
        self.good_bytes += limit - 2 * len(lines)
        self.line_end_bytes += 2 * len(lines)
        return True

    def _gap(self, data: bytes, position: int, limit: int, found: list[Plain]) -> None:
        """Everything between two whole frames, or after the last one: what has not ended stays pending."""
        while position < limit:
            match = _START.search(data, position, limit)
            start = limit if match is None else match.start()
            if start > position:
                self._outside(data[position:start])
            if match is None:
                return
            kind, end = _what_is_wrong(data, start)
            if kind is None:
                self._pending = data[start:]
                return
            tag = self._take_tag() if self._tail else None
            if kind == NO_CHECKSUM:
                self.all_good = False
                self.counts[NO_CHECKSUM] += 1
                self.damaged_bytes += end - start
                found.append(Frame(data[start:end], b"", tag))
            else:
                self._damage(kind, data[start:end], found)
            position = end

    def _damage(self, kind: str, raw: bytes, found: list[Plain]) -> None:
        self.all_good = False
        self.counts[kind] += 1
        self.damaged_bytes += len(raw)
        found.append(Damaged(raw, kind))

    def _outside(self, junk: bytes) -> None:
        ends = junk.count(b"\r") + junk.count(b"\n")
        self.line_end_bytes += ends
        self.junk_bytes += len(junk) - ends
        self._tail = (self._tail + junk[-_TAIL:])[-_TAIL:]

    def _take_tag(self) -> str | None:
        """The source of a TAG block that ends where a frame begins; its bytes move from junk to TAG."""
        tail, self._tail = self._tail, b""
        if not tail.endswith(b"\\"):
            return None
        match = _TAG.search(tail, max(tail.rfind(b"\\", 0, len(tail) - 1), 0))
        if match is None:
            return None
        length = match.end() - match.start()
        self.junk_bytes -= length
        self.tag_bytes += length
        text, checksum = match.groups()
        if reduce(xor, text, 0) != int(checksum, 16):
            self.counts["bad_tag"] += 1
            return None
        for part in text.split(b","):
            if part.startswith(b"s:"):
                return str(part[2:], "ascii", "replace")
        return None


def _what_is_wrong(data: bytes, start: int) -> tuple[str | None, int]:
    """Why no whole frame begins at `start`, and where the damaged one ends; None = it has not ended yet."""
    match = _STOP.search(data, start + 1, start + 1 + _LONGEST_TEXT)
    if match is None:
        if len(data) - start > _LONGEST_TEXT:
            return TOO_LONG, start + _LONGEST_TEXT
        return None, 0
    stop = match.start()
    byte = data[stop]
    if byte in b"\r\n":
        return NO_CHECKSUM, stop
    if byte in b"$!":
        return TRUNCATED, stop
    if byte != 0x2A:
        return BAD_BYTES, stop + 1
    end = stop + 1
    while end < len(data) and end < stop + 3 and data[end] in _HEX_DIGITS:
        end += 1
    if end == len(data) and end < stop + 3:
        return None, 0
    return TRUNCATED, end


def _running_xor(data: bytes) -> bytes:
    """Byte i of the result is the XOR of bytes 0 to i: an inclusive scan by doubling shifts of one integer."""
    number = int.from_bytes(data, "big")
    shift, bits = 8, 8 * len(data)
    while shift < bits:
        number ^= number >> shift
        shift *= 2
    return number.to_bytes(len(data), "big")
