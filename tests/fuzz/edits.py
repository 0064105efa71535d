"""Inputs as lists of edits to a sound file: a small input reaches every byte of a large file.

Eight bytes an edit: place (4), what (1), value (1), length (2). A coverage-guided fuzzer then mutates edits, not files.
"""

from __future__ import annotations

import struct

_EDIT = struct.Struct(">IBBH")


def edited(data: bytes, script: bytes, *, most: int = 12) -> bytes:
    """The data after the edits of the script."""
    out = bytearray(data)
    for start in range(0, min(len(script), most * _EDIT.size), _EDIT.size):
        place, what, value, length = _EDIT.unpack(script[start : start + _EDIT.size].ljust(_EDIT.size, b"\0"))
        if not out:
            break
        place %= len(out)
        match what % 8:
            case 0 | 1:
                out[place] ^= 1 << value % 8
            case 2 | 3:
                out[place] = value
            case 4:
                end = min(len(out), place + 1 + length % 64)
                out[place:end] = bytes([value]) * (end - place)
            case 5:  # a piece from somewhere else over this one
                source = (place * 7 + value * 1024) % len(out)
                piece = out[source : source + 1 + length % 2048]
                out[place : place + len(piece)] = piece
            case 6:
                if value < 64:
                    del out[place:]
                else:
                    del out[place : place + 1 + length % 128]
            case _:
                out[place:place] = bytes([value]) * (1 + length % 32)
    return bytes(out)


def script_of(*edits: tuple[int, int, int, int]) -> bytes:
    """A script from its edits, for seeds."""
    return b"".join(_EDIT.pack(*one) for one in edits)
