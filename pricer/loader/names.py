"""From a cell to a name: one of a few words, an id, free text, a currency, a calendar or a tenor."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from enum import StrEnum

from pricer.loader.currencies import CURRENCY_CODES
from pricer.loader.faults import Fault, Reading
from pricer.loader.kinds import read_name
from pricer.loader.sheets import Cell
from pricer.loader.text import fold, nearest, quoted
from pricer.market.calendars import CALENDARS

#: Longer tenors are typing mistakes: no market quotes them.
LONGEST_TENOR_YEARS = 100

_TENOR = re.compile(r"([0-9]{1,3})\s*([DWMY])", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Choice:
    """One of a few words; case, spaces, underscores and hyphens do not count."""

    choices: tuple[str, ...]
    options: Mapping[str, str]  # the word, as it is and folded -> the word, or the member of an enumeration

    @classmethod
    def of(cls, words: type[StrEnum] | Iterable[str]) -> Choice:
        words = tuple(words)
        return cls(tuple(map(str, words)), {fold(word): word for word in words} | {str(word): word for word in words})

    def words(self) -> str:
        return f"one of: {', '.join(self.choices)}"

    def read(self, cell: Cell, reading: Reading) -> str:
        if isinstance(cell, str) and cell in self.options:
            return self.options[cell]
        text = read_name(cell, reading)
        word = self.options.get(fold(text))
        if word is None:
            guess = nearest(text, self.choices)
            raise Fault("unknown-word", quoted(text), mend=f'Did you mean "{guess}"?' if guess else "")
        return word


@dataclass(frozen=True, slots=True)
class YesNo:
    """Yes or no; the truth values of a spreadsheet are taken as such."""

    choices: tuple[str, ...] = ("yes", "no")

    def words(self) -> str:
        return "yes or no"

    def read(self, cell: Cell, reading: Reading) -> bool:
        if isinstance(cell, bool):
            return cell
        answer = fold(read_name(cell, reading))
        if answer not in self.choices:
            raise Fault("unknown-word", quoted(str(cell)))
        return answer == "yes"


@dataclass(frozen=True, slots=True)
class Identifier:
    """A name that other tables refer to. Numbers become text without a decimal point."""

    def words(self) -> str:
        return "an identifier: letters, digits and signs"

    def read(self, cell: Cell, reading: Reading) -> str:
        return read_name(cell, reading)


@dataclass(frozen=True, slots=True)
class FreeText:
    """Any text; it is never taken for a formula."""

    def words(self) -> str:
        return "text"

    def read(self, cell: Cell, reading: Reading) -> str:
        return read_name(cell, reading, names=False)


@dataclass(frozen=True, slots=True)
class Currency:
    """A currency code of ISO 4217."""

    def words(self) -> str:
        return "a currency code of ISO 4217 such as EUR"

    def read(self, cell: Cell, reading: Reading) -> str:
        if isinstance(cell, str) and cell in CURRENCY_CODES:
            return cell
        text = read_name(cell, reading)
        # "GBp" means pence: taking it for GBP would be wrong by a factor of 100.
        if not (text.isupper() or text.islower()) and text.upper() in CURRENCY_CODES:
            raise Fault(
                "unknown-currency", quoted(text), mend=f'Write "{text.upper()}", with amounts in its main unit.'
            )
        if text.upper() not in CURRENCY_CODES:
            raise Fault("unknown-currency", quoted(text))
        return text.upper()


@dataclass(frozen=True, slots=True)
class CurrencyPair:
    """Two currency codes written together."""

    def words(self) -> str:
        return "two different currency codes of ISO 4217 written together, such as EURUSD"

    def read(self, cell: Cell, reading: Reading) -> str:
        text = read_name(cell, reading)
        pair = text.replace("/", "").replace("-", "").replace(" ", "")
        codes = pair[:3].upper(), pair[3:].upper()
        if not (pair.isupper() or pair.islower()) or codes[0] == codes[1] or not CURRENCY_CODES.issuperset(codes):
            raise Fault("unknown-currency", quoted(text))
        return pair.upper()


@dataclass(frozen=True, slots=True)
class CalendarName:
    """A known calendar, or several joined by ``+`` (open where all are open)."""

    @property
    def choices(self) -> tuple[str, ...]:
        return tuple(CALENDARS)

    def words(self) -> str:
        return f"a calendar, or several joined by +, of: {', '.join(CALENDARS)}"

    def read(self, cell: Cell, reading: Reading) -> str:
        parts = [part.strip().upper() for part in read_name(cell, reading).split("+")]
        for part in parts:
            if part not in CALENDARS:
                guess = nearest(part, CALENDARS)
                raise Fault("unknown-word", quoted(part), mend=f'Did you mean "{guess}"?' if guess else "")
        return "+".join(parts)


@dataclass(frozen=True, slots=True)
class Tenor:
    """A length of time such as ``3M``."""

    def words(self) -> str:
        return "a tenor: a whole number and D, W, M or Y, such as 3M"

    def read(self, cell: Cell, reading: Reading) -> str:
        text = read_name(cell, reading)
        match = _TENOR.fullmatch(text)
        if match is None or int(match[1]) == 0:
            raise Fault("not-a-tenor", quoted(text))
        if match[2] in "Yy" and int(match[1]) > LONGEST_TENOR_YEARS:
            raise Fault("out-of-range", quoted(text), f"a tenor of at most {LONGEST_TENOR_YEARS}Y")
        return f"{int(match[1])}{match[2].upper()}"


@dataclass(frozen=True, slots=True)
class QuarterlyTenor:
    """A length of time that premiums paid each quarter fit into."""

    def words(self) -> str:
        return "a tenor of whole quarters, such as 6M or 5Y"

    def read(self, cell: Cell, reading: Reading) -> str:
        tenor = Tenor().read(cell, reading)
        if tenor[-1] not in "MY" or (tenor[-1] == "M" and int(tenor[:-1]) % 3):
            raise Fault("not-a-tenor", quoted(tenor))
        return tenor
