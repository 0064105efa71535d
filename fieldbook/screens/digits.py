"""Solid block digits and capitals, readable from three metres: five rows, drawn by hand for this book.

Each letter is 5 rows of a small grid; `#` is a filled cell. `big` doubles the width, so that strokes are as wide as
they are high in a terminal's tall cells, and scales further while it fits.
"""

from __future__ import annotations

_SHAPES = {
    "0": "### #.# #.# #.# ###", "1": ".#. ##. .#. .#. ###", "2": "### ..# ### #.. ###", "3": "### ..# ### ..# ###",
    "4": "#.# #.# ### ..# ..#", "5": "### #.. ### ..# ###", "6": "### #.. ### #.# ###", "7": "### ..# .#. .#. .#.",
    "8": "### #.# ### #.# ###", "9": "### #.# ### ..# ###", ":": ". # . # .", ".": ". . . . #", " ": ".. .. .. .. ..",
    "-": "... ... ### ... ...", "A": ".#. #.# ### #.# #.#", "B": "##. #.# ##. #.# ##.", "C": "### #.. #.. #.. ###",
    "D": "##. #.# #.# #.# ##.", "E": "### #.. ##. #.. ###", "F": "### #.. ##. #.. #..", "G": "### #.. #.# #.# ###",
    "H": "#.# #.# ### #.# #.#", "I": "### .#. .#. .#. ###", "K": "#.# #.# ##. #.# #.#", "L": "#.. #.. #.. #.. ###",
    "M": "#...# ##.## #.#.# #...# #...#", "N": "#..# ##.# #.## #..# #..#", "O": "### #.# #.# #.# ###",
    "P": "### #.# ### #.. #..", "R": "##. #.# ##. #.# #.#", "S": "### #.. ### ..# ###", "T": "### .#. .#. .#. .#.",
    "U": "#.# #.# #.# #.# ###", "V": "#.# #.# #.# #.# .#.", "W": "#...# #...# #.#.# ##.## #...#",
    "Y": "#.# #.# .#. .#. .#.", "Q": "### #.# #.# ### ..#", "J": "..# ..# ..# #.# ###", "X": "#.# #.# .#. #.# #.#",
    "Z": "### ..# .#. #.. ###", "m": "..... ..... ####. #.#.# #.#.#", "%": "#..# ..#. .#.. #... ...#",
}  # fmt: skip


def _grid(text: str) -> list[str]:
    found = [_SHAPES.get(letter) or _SHAPES.get(letter.upper()) or _SHAPES["-"] for letter in text]
    letters = [shape.split() for shape in found]
    return [".".join(shape[line] for shape in letters) for line in range(5)]


def big(text: str, width: int, height: int) -> list[str]:
    """The text in block letters, as large as `width` x `height` cells allow; plain text where nothing fits.

    Args:
        text: digits, capitals, point, colon and spaces; another letter stands as a dash.
        width: cells at hand.
        height: rows at hand.
    """
    grid = _grid(text)
    columns = len(grid[0])
    across = min(width // columns, 2 * (height // 5)) if columns else 0
    if across < 1 or height < 5:
        return [text[:width]]
    down = max(1, min(height // 5, round(across / 2)))
    lines = []
    for line in grid:
        drawn = "".join(("█" if cell == "#" else " ") * across for cell in line)
        lines.extend([drawn] * down)
    return lines
