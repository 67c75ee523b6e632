"""Words large enough to be read from a step away: five rows of blocks a letter, for a terminal that has room."""

from __future__ import annotations

_ROWS = 5
# letters of the words that `say.word` gives, and no more; `#` is a block
_LETTERS = {
    "A": (" ### ", "#   #", "#####", "#   #", "#   #"),
    "C": (" ####", "#    ", "#    ", "#    ", " ####"),
    "E": ("#####", "#    ", "#### ", "#    ", "#####"),
    "F": ("#####", "#    ", "#### ", "#    ", "#    "),
    "H": ("#   #", "#   #", "#####", "#   #", "#   #"),
    "M": ("#   #", "## ##", "# # #", "#   #", "#   #"),
    "N": ("#   #", "##  #", "# # #", "#  ##", "#   #"),
    "O": (" ### ", "#   #", "#   #", "#   #", " ### "),
    "P": ("#### ", "#   #", "#### ", "#    ", "#    "),
    "R": ("#### ", "#   #", "#### ", "#  # ", "#   #"),
    "S": (" ####", "#    ", " ### ", "    #", "#### "),
    "T": ("#####", "  #  ", "  #  ", "  #  ", "  #  "),
    "U": ("#   #", "#   #", "#   #", "#   #", " ### "),
    "-": ("     ", "     ", " ### ", "     ", "     "),
    " ": ("   ",) * _ROWS,
}


def large(word: str, width: int, block: str = "\u2588") -> list[str]:
    """Return the word in rows of blocks, twice as wide where there is room, or as it is where there is none."""
    letters = [_LETTERS.get(letter) for letter in word]
    rows = ["  ".join(shape[row] for shape in letters if shape is not None) for row in range(_ROWS)]
    if None in letters or len(rows[0]) > width:
        return [word]
    times = 2 if 2 * len(rows[0]) <= width else 1
    return ["".join(block * times if mark == "#" else " " * times for mark in row).rstrip() for row in rows]
