"""How wide text comes out, in the unit of column widths: one digit of the workbook's font.

Advance widths of the bold face are those of Arial, from memory, in thousandths of the font size; a digit has 556.
"""

from __future__ import annotations

import math

_DIGIT = 556.0
_BOLD = {
    **dict.fromkeys(" ,./ijl|", 278.0),
    **dict.fromkeys("()-ft'", 333.0),
    "r": 389.0,
    **dict.fromkeys("aceksvxyz0123456789", 556.0),
    "m": 889.0,
    "w": 778.0,
    "%": 889.0,
}
_OTHER_SMALL, _CAPITAL = 611.0, 740.0
_PADDING = 0.4  # what a program keeps free inside a cell at least
_AIR = 1.3  # what is to stay free between two headings besides


def plain_width(text: str) -> int:
    """Width of text in the plain face: capitals are wider than digits, the other letters a little narrower."""
    return len(text) + math.ceil(0.25 * sum(c.isupper() for c in text))


def heading_width(text: str) -> float:
    """Width of text in the bold face."""
    return sum(_BOLD.get(c, _CAPITAL if c.isupper() else _OTHER_SMALL) for c in text) / _DIGIT


def heading_lines(text: str, width: float, indent: float = 0.0) -> list[str]:
    """The lines into which a program breaks a heading in a column ``width`` wide."""
    room = width - _PADDING - indent
    lines: list[str] = []
    for word in text.split():
        if lines and heading_width(f"{lines[-1]} {word}") <= room:
            lines[-1] += f" {word}"
        else:
            lines.append(word)
    return lines or [""]


def fits(lines: list[str], width: float, indent: float = 0.0) -> bool:
    """Whether every line leaves air to the next column."""
    return max(map(heading_width, lines)) <= width - _PADDING - indent - _AIR
