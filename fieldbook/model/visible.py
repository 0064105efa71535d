r"""Which characters a reader cannot see, and how texts of other people are shown on a terminal and made into file names.

One set for terminal, screens and paper: controls (C0, C1, DEL), format characters (direction overrides, zero-width
ones, tags), line and paragraph separators, surrogates, private and unassigned code points, and letters and marks that
leave no ink (fillers, joiners, variation selectors). On a terminal such a character stands as `\x1b` or `\u202e`, on paper
as `‹U+202E›` (`certificate.printable`): never silently dropped, so that two names that look alike are seen to differ.
"""

from __future__ import annotations

import re
import unicodedata

_HIDDEN = frozenset({"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"})
# Without ink, though of other categories: Unicode 16, Default_Ignorable_Code_Point, and the empty braille cell.
_NO_INK = frozenset({0x034F, 0x115F, 0x1160, 0x17B4, 0x17B5, 0x2800, 0x3164, 0xFFA0}).union(
    range(0x180B, 0x1810), range(0xFE00, 0xFE10), range(0xE0100, 0xE01F0)
)
_RESERVED = re.compile(r"(con|prn|aux|nul|clock\$|conin\$|conout\$|(com|lpt)[0-9¹²³])(?=\.|$)", re.IGNORECASE)
LONGEST_STEM = 60


def is_hidden(letter: str) -> bool:
    """Whether a character cannot be seen, or moves what can."""
    return unicodedata.category(letter) in _HIDDEN or ord(letter) in _NO_INK


def visible(text: str) -> str:
    r"""The text with every hidden character written as `\x1b`, `\u202e` or `\U000e0041`."""
    if text.isascii() and text.isprintable():
        return text
    return "".join(_escaped(letter) if is_hidden(letter) else letter for letter in text)


def _escaped(letter: str) -> str:
    number = ord(letter)
    if number < 0x100:
        return f"\\x{number:02x}"
    return f"\\u{number:04x}" if number < 0x10000 else f"\\U{number:08x}"


def file_stem(text: str, otherwise: str = "mark") -> str:
    """A file name without ending from any text: no path, nothing hidden, no name that a system keeps for itself.

    Letters and digits of any script, `-`, `_` and single dots stay, everything else becomes `_`; at most 60 characters.
    """
    plain = unicodedata.normalize("NFC", text)
    kept = "".join(letter if letter.isalnum() or letter in "-_." else "_" for letter in plain if not is_hidden(letter))
    stem = re.sub(r"\.{2,}", ".", kept)[:LONGEST_STEM].strip(".")
    return "_" + stem if _RESERVED.match(stem) or stem.startswith("-") else stem or otherwise
