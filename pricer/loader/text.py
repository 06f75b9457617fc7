"""Text as people meant it: no stray spaces, no invisible characters, one way to compare words."""

from __future__ import annotations

import difflib
import unicodedata
from collections.abc import Iterable

#: Full-width forms (U+FF01 to U+FF5E) of the printable ASCII characters, as East Asian keyboards type them.
_FULL_WIDTH = {code: code - 0xFEE0 for code in range(0xFF01, 0xFF5F)}

#: Categories of characters that show nothing: control, format (zero-width, direction marks), unassigned.
_INVISIBLE = ("Cc", "Cf", "Cn", "Co", "Cs")


def clean(text: str) -> tuple[str, str]:
    """The text without outer spaces and invisible characters, and those characters in words.

    Every kind of space, tab and line break counts as a space; runs of them inside become one.
    The words are empty when nothing invisible was there, else e.g. ``"U+200B"``.
    """
    if text.isascii() and text.isprintable() and "  " not in text:
        return text.strip(), ""
    invisible = sorted({c for c in text if not c.isspace() and unicodedata.category(c) in _INVISIBLE})
    kept = "".join(c for c in text if c not in invisible) if invisible else text
    return " ".join(kept.split()), ", ".join(f"U+{ord(c):04X}" for c in invisible)


def half_width(text: str) -> str:
    """The text with full-width letters, digits and signs as plain ones."""
    return text if text.isascii() else text.translate(_FULL_WIDTH)


def fold(text: str) -> str:
    """The text as names are compared: case, spaces, underscores and hyphens do not count."""
    cleaned = half_width(clean(text)[0]).casefold()
    return "".join(c for c in cleaned if c not in " _-\N{NON-BREAKING HYPHEN}\N{EN DASH}")


def nearest(name: str, names: Iterable[str], *, likeness: float = 0.6) -> str | None:
    """The most alike of ``names``, or None when none is alike enough (0 anything, 1 equal)."""
    by_folded = {fold(candidate): candidate for candidate in names}
    found = difflib.get_close_matches(fold(name), list(by_folded), n=1, cutoff=likeness)
    return by_folded[found[0]] if found else None


def slip_of(name: str, names: Iterable[str]) -> str | None:
    """The one of ``names`` that is ``name`` with one slip of the finger, or two from 6 letters on; None if none is.

    Likeness is a poor measure of short names: "kap" shares only two letters of three with "cap".
    """
    folded = fold(name)
    candidates = [(_slips(fold(candidate), folded), candidate) for candidate in names]
    slips, candidate = min(candidates, default=(len(folded), ""))
    return candidate if slips <= (1 if len(folded) < 6 else 2) else None


def _slips(a: str, b: str) -> int:
    """Letters inserted, left out, changed, or swapped with their neighbour between ``a`` and ``b``.

    The restricted edit distance of Damerau (1964), row by row.
    """
    before, last = [0] * (len(b) + 1), list(range(len(b) + 1))
    for i, x in enumerate(a):
        row = [i + 1]
        for j, y in enumerate(b):
            row.append(min(last[j] + (x != y), last[j + 1] + 1, row[j] + 1))
            if i and j and x == b[j - 1] and y == a[i - 1]:
                row[-1] = min(row[-1], before[j - 1] + 1)
        before, last = last, row
    return last[-1]


def quoted(text: str, *, limit: int = 60) -> str:
    """The text in quotation marks, shortened so that a message stays one line."""
    shown = clean(text)[0]
    return f'"{shown}"' if len(shown) <= limit else f'"{shown[: limit - 3]}..."'


def misspelt(name: str, names: Iterable[str]) -> str | None:
    """The one of ``names`` that ``name`` may be with a slip of the finger, the most alike; None if there is none."""
    likeness = [
        (difflib.SequenceMatcher(None, fold(name), fold(known)).ratio(), known)
        for known in names
        if looks_misspelt(name, known)
    ]
    return max(likeness)[1] if likeness else None


def looks_misspelt(name: str, known: str) -> bool:
    """Whether ``name`` may be ``known`` with a slip of the finger.

    Names that differ in digits only (T-001 and T-002) count as different on purpose.
    """
    a, b = fold(name), fold(known)
    if "".join(c for c in a if not c.isdigit()) == "".join(c for c in b if not c.isdigit()):
        return a == b
    return difflib.SequenceMatcher(None, a, b).ratio() >= 0.75
