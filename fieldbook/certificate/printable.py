"""User text on its way to paper: nothing invisible, nothing that a face cannot show, nothing silently dropped.

The facts keep every text as typed. On paper a control character, a direction override or an unassigned code point
stands as its number, `‹U+202E›`, so that it can neither hide nor rearrange what is printed. Paper is set with the
faces that come inside the typesetter (no system fonts, so that equal facts give equal bytes); characters outside
`FACE_RANGES` stand as their number too, and the page says so.
"""

from __future__ import annotations

from typing import Any

from fieldbook.model.visible import is_hidden

# Blocks that every cut of Libertinus Serif in the typst wheel (0.15) can show, read from its character map.
FACE_RANGES = (
    (0x0020, 0x007E),  # ASCII
    (0x00A0, 0x017F),  # Latin-1, Latin Extended-A
    (0x0218, 0x021B),  # Romanian
    (0x0300, 0x0331),  # combining marks
    (0x0384, 0x038A),  # Greek
    (0x038C, 0x038C),
    (0x038E, 0x03A1),
    (0x03A3, 0x03CE),
    (0x0401, 0x0401),  # Cyrillic
    (0x0403, 0x040C),
    (0x040F, 0x044F),
    (0x0451, 0x0451),
    (0x0453, 0x0453),
    (0x0455, 0x0458),
    (0x045C, 0x045C),
    (0x045E, 0x045E),
    (0x05D0, 0x05EA),  # Hebrew letters
    (0x1E00, 0x1E9B),  # Latin Extended Additional
    (0x1EA0, 0x1EF9),
    (0x2010, 0x2027),  # dashes, quotes, dagger, bullet, ellipsis
    (0x2030, 0x2037),  # per mille, primes
    (0x2039, 0x203A),
    (0x20AC, 0x20AC),
    (0x2116, 0x2116),
    (0x2122, 0x2122),
    (0x2190, 0x2193),
    (0x2212, 0x2212),
    (0x221A, 0x221A),
    (0x221E, 0x221E),
    (0x2248, 0x2248),
    (0x2260, 0x2260),
    (0x2264, 0x2265),
)


def printable(text: str) -> str:
    """The text with every character that cannot be seen written as its number."""
    return "".join(_number(char) if is_hidden(char) else char for char in text)


def in_face(char: str) -> bool:
    """Whether the face of the PDF can show this character."""
    code = ord(char)
    return any(first <= code <= last for first, last in FACE_RANGES)


def for_face(text: str) -> str:
    """The text with every character that the face of the PDF lacks written as its number."""
    return "".join(char if in_face(char) else _number(char) for char in printable(text))


def _number(char: str) -> str:
    return f"‹U+{ord(char):04X}›"


def shown(tree: Any) -> Any:
    """A tree with every text printable; keys and everything else as they are."""
    if isinstance(tree, str):
        return printable(tree)
    if isinstance(tree, dict):
        return {key: shown(value) for key, value in tree.items()}
    if isinstance(tree, list):
        return [shown(value) for value in tree]
    return tree
