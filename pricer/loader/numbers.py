"""From a cell to a number: one that can mean nothing else, or a fault that says how to write it."""

from __future__ import annotations

import math
import re
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
    with ``basis_points``, from 10 on, for basis points.
    """

    above: float | None = None
    at_least: float | None = None
    below: float | None = None
    at_most: float | None = None
    not_zero: bool = False
    percent: bool = False
    decimal_limit: float | None = None
    basis_points: bool = False

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
        inside = (
            (self.above is None or number > self.above)
            and (self.at_least is None or number >= self.at_least)
            and (self.below is None or number < self.below)
            and (self.at_most is None or number <= self.at_most)
            and not (self.not_zero and number == 0.0)
        )
        if self.decimal_limit is not None and abs(number) > self.decimal_limit:
            if self.basis_points and abs(number) >= 10.0:
                raise as_basis_points(number, self.words())
            raise as_percentage_points(number, self.words())
        if not inside:
            raise Fault("out-of-range", in_words(cell))
        return number


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


def as_percentage_points(number: float, expected: str = "") -> Fault:
    """The fault of a number that looks like percentage points where a decimal belongs."""
    decimal = number_in_words(float(Decimal(repr(number)) / 100))
    points = number_in_words(number)
    return Fault("not-a-decimal", points, expected, f"Did you mean {decimal} ({points} %)?")


def as_basis_points(number: float, expected: str) -> Fault:
    """The fault of a number that looks like basis points where a decimal belongs."""
    decimal = number_in_words(float(Decimal(repr(number)) / 10_000))
    points = number_in_words(number)
    return Fault("not-a-decimal", points, expected, f"Did you mean {decimal} ({points} basis points)?")


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
