"""What the desk pays for unsecured cash, and what it earns on it, above the collateral rate."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

from pricer.market.curves import DiscountCurve
from pricer.market.two_sided import as_curves, average_forward_rate, check_order


@dataclass(frozen=True, slots=True)
class FundingCurve:
    """Spreads of the desk's own unsecured cash over the currency's standard curve, continuous per year.

    ``borrowing`` and ``lending`` are curves of spreads: their discount factors multiply those
    of the standard curve.
    """

    borrowing: DiscountCurve
    lending: DiscountCurve

    @classmethod
    def from_zero_spreads(
        cls,
        valuation_date: date,
        dates: Sequence[date],
        borrowing_spreads: Sequence[float],
        lending_spreads: Sequence[float],
        day_count: str = "ACT/365F",
    ) -> FundingCurve:
        """From continuously compounded zero spreads per year of ``day_count``, one of each per date.

        Raises ValueError unless dates increase strictly after the valuation date, spreads are
        finite, and no forward spread earned on lending exceeds the one paid on borrowing.
        """
        sides = (("borrowing", borrowing_spreads), ("lending", lending_spreads))
        borrowing, lending = as_curves("funding,", "", valuation_date, dates, sides, day_count)
        check_order(borrowing, lending, "borrowing", "lending")
        return cls(borrowing, lending)

    @property
    def last_date(self) -> date:
        """The last quoted date."""
        return self.borrowing.last_date

    def is_extrapolated(self, day: date) -> bool:
        """Whether ``day`` lies beyond the last quoted date."""
        return self.borrowing.is_extrapolated(day)

    def borrowing_spread(self, start: date, end: date) -> float:
        """Forward spread paid on borrowing from ``start`` to ``end``, continuous per year."""
        return average_forward_rate(self.borrowing, start, end)

    def lending_spread(self, start: date, end: date) -> float:
        """Forward spread earned on lending from ``start`` to ``end``, continuous per year."""
        return average_forward_rate(self.lending, start, end)
