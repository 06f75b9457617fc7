"""What every column's kind of value has in common: describing itself, and reading text and names."""

from __future__ import annotations

import math
import re
from typing import Protocol

from pricer.loader.faults import Fault, Reading, in_words
from pricer.loader.sheets import Cell, ErrorValue, UncalculatedFormula
from pricer.loader.text import clean, half_width, quoted

_SPREADSHEET_ERROR = re.compile(
    r"#(N/A|REF!|VALUE!|DIV/0!|NAME\?|NUM!|NULL!|SPILL!|CALC!|FIELD!|BLOCKED!|CONNECT!|BUSY!|UNKNOWN!|GETTING_DATA)"
)


class Kind(Protocol):
    """What a column's cells may hold."""

    def words(self) -> str:
        """What is expected, as a message says it: "a number above 0"."""

    def read(self, cell: Cell, reading: Reading) -> object:
        """The value of a cell that is not blank; raises :class:`Fault`."""


def plain_text(cell: str, reading: Reading, *, names: bool = True) -> str:
    """Cleaned text; invisible characters are noted, and in names full-width ones are made plain."""
    text, invisible = clean(cell)
    if text.startswith("#") and _SPREADSHEET_ERROR.fullmatch(text):
        refuse_unusable(ErrorValue(text))
    plain = half_width(text) if names else text
    if invisible or plain != text:
        what = f"invisible characters ({invisible})" if invisible else "full-width characters"
        found, mend = f"{what} in {quoted(cell)}", f"Read as {quoted(plain)}; retype the cell."
        reading.note(Fault("odd-characters", found, "plain text", mend))
    return plain


def read_name(cell: Cell, reading: Reading, *, names: bool = True) -> str:
    """Text, or a whole number as text: 1001 and 1001.0 both are "1001"."""
    if isinstance(cell, str):
        return plain_text(cell, reading, names=names)
    refuse_unusable(cell)
    # Beyond 15 digits a spreadsheet no longer keeps every one.
    if isinstance(cell, float) and abs(cell) < 1e15 and cell == math.floor(cell):
        return str(int(cell))
    raise Fault("not-text", in_words(cell), mend="Format the cell as text and type it again.")


def refuse_unusable(cell: Cell) -> None:
    """Raise the fault of a cell that holds no value of any kind."""
    if isinstance(cell, ErrorValue):
        raise Fault("error-cell", in_words(cell), mend="Mend the formula or its source, or type the value.")
    if isinstance(cell, UncalculatedFormula):
        raise Fault(
            "formula-without-result",
            in_words(cell),
            mend="Open the workbook in a spreadsheet program, save it there and run again, or type the value.",
        )
