"""Text made safe for the files it goes into; numbers never pass through here."""

from __future__ import annotations

import re
import unicodedata

CSV_RULE = (
    "A text that begins with an apostrophe, a tab, a line break or (after any blanks) with one of = + - @ has one "
    "apostrophe put in front of it, so that no spreadsheet program takes it for a formula; take one leading "
    "apostrophe away to get the text back. Numbers are never touched: -5.2 stays -5.2."
)

# Control characters that XML 1.0 forbids, lone surrogates and the two non-characters.
_UNWRITABLE = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")
_LINE_BREAK = re.compile("\r\n?")
# The full-width forms are folded to the plain ones by some spreadsheet programs.
_FORMULA = re.compile("['\t\n]|\\s*[=+\\-@＝＋－＠]")
_SLUG_LENGTH = 40


def clean(text: str) -> str:
    """``text`` with line breaks as ``\\n`` and unwritable characters shown as U+FFFD."""
    return _UNWRITABLE.sub("\ufffd", _LINE_BREAK.sub("\n", text))


def looks_like_formula(text: str) -> bool:
    """Whether a spreadsheet program may take ``text`` for a formula when a person edits or imports it."""
    return _FORMULA.match(text) is not None


def csv_text(text: str) -> str:
    """``text`` as it stands in a CSV cell, under :data:`CSV_RULE`."""
    text = clean(text)
    return "'" + text if looks_like_formula(text) else text


def shorten(text: str, length: int) -> str:
    """``text`` on one line and at most ``length`` characters long, ended by an ellipsis where it was cut."""
    text = " ".join(text.split())
    return text if len(text) <= length else text[: length - 1].rstrip() + "…"


def slug(text: str) -> str:
    """``text`` as part of a file name: lower case, letters and digits joined by hyphens; ``book`` if none is left."""
    plain = unicodedata.normalize("NFKD", text.lower())
    plain = "".join(c for c in plain if not unicodedata.combining(c))
    words = "".join(c if c.isalnum() else " " for c in plain).split()
    return "-".join(words)[:_SLUG_LENGTH].strip("-") or "book"
