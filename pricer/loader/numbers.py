"""From a cell to a number: one that can mean nothing else, or a fault that says how to write it."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from decimal import Decimal

from pricer.loader.faults import Fault, Reading, in_words, number_in_words
from pricer.loader.kinds import plain_text, refuse_unusable
from pricer.loader.sheets import Cell
from pricer.loader.text import fold, quoted

_NUMBER = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,4})?)\s*(%?)")
_DECIMAL_COMMA = re.compile(r"[+-]?(?:[0-9]*|[0-9]{1,3}(?:\.[0-9]{3})+),[0-9]+")
_GROUPED = re.compile(r"[+-]?[1-9][0-9]{0,2}(?:([, '\u2019._])[0-9]{3})(?:\1[0-9]{3})*(\.[0-9]+)?")
_BETWEEN = re.compile(r"[+-]?[1-9][0-9]{0,2},[0-9]{3}")


@dataclass(frozen=True, slots=True)
class Number:
    """A finite number within limits.

    ``percent`` allows text such as ``22.5%``. A value beyond ``decimal_limit`` in size is
    taken for percentage points typed where a decimal belongs, and refused with that guess;
    with ``basis_points`` for basis points, or below 10 for either; with ``is_rate`` for basis points
    where it is too large for percentage points. No guess breaks a limit itself.
    """

    above: float | None = None
    at_least: float | None = None
    below: float | None = None
    at_most: float | None = None
    not_zero: bool = False
    percent: bool = False
    decimal_limit: float | None = None
    basis_points: bool = False
    is_rate: bool = False

    def words(self) -> str:
        limits = [
            f"{word} {number_in_words(float(limit))}"
            for word, limit in (
                ("above", self.above),
                ("of at least", self.at_least),
                ("below", self.below),
                ("of at most", self.at_most),
            )
            if limit is not None
        ]
        noun = "a number" if self.decimal_limit is None else "a decimal number"
        limits += ["other than 0"] if self.not_zero else []
        if self.decimal_limit is not None and self.at_most is None and self.below is None:
            limits.append(f"no larger than {number_in_words(self.decimal_limit)}")
        return f"{noun} {' and '.join(limits)}".strip()

    def read(self, cell: Cell, reading: Reading) -> float:
        number = read_number(cell, reading, percent=self.percent)
        if self.decimal_limit is not None and abs(number) > self.decimal_limit:
            raise self._not_a_decimal(number)
        if not self._allows(number):
            raise Fault("out-of-range", in_words(cell))
        return number

    def _allows(self, number: float) -> bool:
        return (
            (self.above is None or number > self.above)
            and (self.at_least is None or number >= self.at_least)
            and (self.below is None or number < self.below)
            and (self.at_most is None or number <= self.at_most)
            and not (self.not_zero and number == 0.0)
            and (self.decimal_limit is None or abs(number) <= self.decimal_limit)
        )

    def _not_a_decimal(self, number: float) -> Fault:
        """The fault of a number beyond the decimal limit, with what it may have meant."""
        percent, basis_points = (number / 100.0, "%"), (number / 10_000.0, "basis points")
        if self.basis_points:
            guesses = [percent, basis_points] if abs(number) < 10.0 else [basis_points]
        else:
            guesses = [percent] if self._allows(percent[0]) or not self.is_rate else [basis_points]
        fitting = [unit for decimal, unit in guesses if self._allows(decimal)]
        return Fault("not-a-decimal", number_in_words(number), self.words(), _did_you_mean(number, fitting))


@dataclass(frozen=True, slots=True)
class WholeNumber:
    """A whole number from ``lowest`` to ``highest``."""

    lowest: int
    highest: int

    def words(self) -> str:
        return f"a whole number from {self.lowest} to {self.highest}"

    def read(self, cell: Cell, reading: Reading) -> int:
        number = read_number(cell, reading)
        if number != math.floor(number) or not self.lowest <= number <= self.highest:
            raise Fault("out-of-range", in_words(cell))
        return int(number)


@dataclass(frozen=True, slots=True)
class NumberList:
    """Numbers separated by semicolons."""

    def words(self) -> str:
        return "numbers separated by semicolons, not all 0"

    def read(self, cell: Cell, reading: Reading) -> tuple[float, ...]:
        if not isinstance(cell, str):
            numbers: tuple[float, ...] = (read_number(cell, reading),)
        else:
            text = plain_text(cell, reading)
            if ";" not in text and "," in text:
                raise Fault(
                    "not-a-list", quoted(text), mend=f'Separate the numbers by semicolons: "{_semicolons(text)}".'
                )
            # The pieces of a list are text by nature, so they are read like those of a CSV file.
            pieces = Reading(typed=False)
            numbers = tuple(read_number(part, pieces, percent=True) for part in text.rstrip("; ").split(";"))
        if not any(numbers):
            raise Fault("out-of-range", in_words(cell))
        return numbers


#: Units in which a decimal is mistaken, and how many of them make 1.
_UNITS = {"%": 100, "basis points": 10_000}


def as_percentage_points(number: float, expected: str, limit: float) -> Fault:
    """The fault of a number beyond ``limit``, where a decimal belongs: if it fits, it looks like percentage points."""
    guesses = ["%"] if abs(number) / 100.0 <= limit else []
    mend = _did_you_mean(number, guesses) or "Enter a decimal: 22.5 % is 0.225."
    return Fault("not-a-decimal", number_in_words(number), expected, mend)


def _did_you_mean(number: float, units: Sequence[str]) -> str:
    """``Did you mean 0.225 (22.5 %)?``, or nothing where no unit is named."""
    points = number_in_words(number)
    decimals = [f"{number_in_words(float(Decimal(repr(number)) / _UNITS[unit]))} ({points} {unit})" for unit in units]
    return f"Did you mean {' or '.join(decimals)}?" if decimals else ""


def read_number(cell: Cell, reading: Reading, *, percent: bool = False) -> float:
    """A finite number from a number cell, or from text that can mean one number only."""
    if isinstance(cell, float):
        number = cell
    elif isinstance(cell, str):
        number = _number_from_text(plain_text(cell, reading), percent=percent)
        if reading.typed:
            mend = f"Read as {number_in_words(number)}; format the cell as a number and enter it again."
            reading.note(Fault("number-stored-as-text", f"the text {quoted(cell)}", "a number cell", mend))
    else:
        refuse_unusable(cell)
        mend = "Format the cell as a number and enter it again." if isinstance(cell, date) else ""
        raise Fault("not-a-number", in_words(cell), mend=mend)
    if not math.isfinite(number):
        raise Fault("not-finite", in_words(cell))
    return number


def _number_from_text(text: str, *, percent: bool) -> float:
    plain = text.replace("\N{MINUS SIGN}", "-")
    if match := _NUMBER.fullmatch(plain):
        if not match[2]:
            return float(match[1])
        if percent:
            return float(Decimal(match[1]) / 100)
        raise Fault("not-a-number", quoted(text), mend="Write a plain number without the percent sign.")
    if fold(plain).lstrip("+") in ("nan", "inf", "infinity"):
        raise Fault("not-finite", quoted(text))
    if _BETWEEN.fullmatch(plain):
        raise Fault(
            "ambiguous-number",
            quoted(text),
            mend=f"Write {plain.replace(',', '')} or {plain.replace(',', '.')}: the comma may mean either.",
        )
    if _DECIMAL_COMMA.fullmatch(plain):
        raise Fault(
            "decimal-comma",
            quoted(text),
            mend=f"Write {plain.replace('.', '').replace(',', '.')}, with a decimal point.",
        )
    if grouped := _GROUPED.fullmatch(plain):
        digits = re.sub(r"[^0-9+\-]", "", plain[: len(plain) - len(grouped[2] or "")]) + (grouped[2] or "")
        raise Fault("thousands-separator", quoted(text), mend=f"Write {digits}, without separators.")
    raise Fault("not-a-number", quoted(text))


def _semicolons(text: str) -> str:
    """A list that was separated by commas, as it should be written."""
    return "; ".join(part.strip() for part in text.split(",")) if "." in text else text.replace(",", ".")
