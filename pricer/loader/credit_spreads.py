"""Hazard rates of names, from the table of their credit default swaps."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from pricer.core.issues import Issue
from pricer.loader.credit_rows import CreditRow
from pricer.loader.faults import Fault, number_in_words
from pricer.loader.findings import Findings, by_name
from pricer.loader.table import Row, Table
from pricer.loader.text import quoted
from pricer.market.credit import HazardCurve
from pricer.market.curves import DiscountCurve
from pricer.market.market_quotes import SpreadQuotes

#: The keys of ``Market.rejected`` for names begin so: "credit:NAME".
CREDIT = "credit"


def read_credit(
    table: Table[CreditRow] | None, curves: Mapping[tuple[str, str], DiscountCurve], findings: Findings
) -> tuple[dict[str, HazardCurve], dict[str, SpreadQuotes]]:
    """Hazard rates and their quotes by name; a faulty row costs its name."""
    hazards: dict[str, HazardCurve] = {}
    quotes: dict[str, SpreadQuotes] = {}
    if table is None:
        return hazards, quotes
    own = findings.under(CREDIT)
    for name, rows in by_name(table, "name", own).items():
        own.reject(name, [*_different(table, rows), *_repeated(table, rows)])
        values = [row.value for row in rows if row.value is not None]
        if own.is_rejected(name) or not values:
            continue
        currency = values[0].currency
        curve = curves.get((currency, ""))
        if curve is None:
            fault = Fault(
                "no-standard-curve",
                f"{currency}, which has no usable standard curve",
                "a currency with a curve without collateral in the table curves",
                "Add or mend the curve, or correct the currency.",
            )
            own.reject(name, [table.issue(rows[0].number, "currency", fault)])
            continue
        given = SpreadQuotes(
            name,
            currency,
            values[0].recovery_decimal,
            tuple(value.tenor for value in values),
            tuple(value.cds_spread_decimal for value in values),
        )
        try:
            hazards[name] = HazardCurve.from_cds_spreads(name, curve, given.recovery, given.tenors, given.spreads)
            quotes[name] = given
        except ValueError as error:
            own.reject(name, [_unusable(table, rows, error)])
    return hazards, quotes


def _different(table: Table[CreditRow], rows: Sequence[Row[CreditRow]]) -> list[Issue]:
    """Recovery and currency belong to the name, so every row says the same."""
    issues = []
    usable = [(row.number, row.value) for row in rows if row.value is not None]
    for number, value in usable[1:]:
        first_number, first = usable[0]
        for column in ("recovery_decimal", "currency"):
            here, there = getattr(value, column), getattr(first, column)
            if here != there:
                fault = Fault(
                    f"different-{column}".removesuffix("_decimal"),
                    f"{_words(here)}, but {_words(there)} in row {first_number}",
                    f"one {column} for {quoted(value.name)}",
                    "Correct one of them.",
                )
                issues.append(table.issue(number, column, fault))
    return issues


def _words(value: float | str) -> str:
    return value if isinstance(value, str) else number_in_words(value)


def _repeated(table: Table[CreditRow], rows: Sequence[Row[CreditRow]]) -> list[Issue]:
    first: dict[str, int] = {}
    issues = []
    for row in rows:
        if row.value is None:
            continue
        earlier = first.setdefault(row.value.tenor, row.number)
        if earlier != row.number:
            found = f"a second spread of {row.value.tenor}, as in row {earlier}"
            fault = Fault("repeated-tenor", found, "each tenor once for a name", "Delete one of the two rows.")
            issues.append(table.issue(row.number, "tenor", fault))
    return issues


def _unusable(table: Table[CreditRow], rows: Sequence[Row[CreditRow]], error: ValueError) -> Issue:
    """The bootstrap's own words, at the last row whose tenor they name."""
    words = str(error).split()
    named = [row for row in rows if row.value is not None and row.value.tenor in words]
    fault = Fault(
        "unusable-spreads",
        str(error),
        "spreads from which hazard rates follow",
        "Correct the spreads, or leave one of the tenors out.",
    )
    return table.issue((named or rows)[-1].number, "cds_spread_decimal", fault)
