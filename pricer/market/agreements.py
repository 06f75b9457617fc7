"""Terms of the agreement under which the trades of a netting set are collateralised and closed out."""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum


class Collateral(StrEnum):
    """Who posts variation collateral."""

    NONE = "none"
    TWO_WAY = "two-way"
    ONE_WAY_TO_DESK = "one-way to desk"  # only the counterparty posts
    ONE_WAY_TO_COUNTERPARTY = "one-way to counterparty"  # only the desk posts

    @property
    def counterparty_posts(self) -> bool:
        return self in (Collateral.TWO_WAY, Collateral.ONE_WAY_TO_DESK)

    @property
    def desk_posts(self) -> bool:
        return self in (Collateral.TWO_WAY, Collateral.ONE_WAY_TO_COUNTERPARTY)


class CloseOut(StrEnum):
    """What the claim of a close-out is measured by."""

    RISK_FREE_MARK = "risk-free mark"  # the value without credit and funding
    REPLACEMENT_VALUE = "replacement value"  # the value with them


@dataclass(frozen=True, slots=True)
class Agreement:
    """One netting set's terms; amounts in ``currency``, seen from the desk.

    ``counterparty_threshold`` is the exposure of the desk that stays uncovered before the
    counterparty posts, ``desk_threshold`` the counterparty's before the desk posts.
    ``independent_amount`` is held by the desk whatever the exposure (negative: posted by it).
    ``collateral_spread`` is what collateral earns its poster above the standard curve of
    ``currency``, continuous per year. ``margin_period_days`` are the business days from the
    last collateral received to the close-out.
    """

    netting_set: str
    counterparty: str
    currency: str
    collateral: Collateral = Collateral.NONE
    counterparty_threshold: float = 0.0
    desk_threshold: float = 0.0
    minimum_transfer_amount: float = 0.0
    independent_amount: float = 0.0
    collateral_spread: float = 0.0
    margin_period_days: int = 0
    close_out: CloseOut = CloseOut.RISK_FREE_MARK

    def __post_init__(self) -> None:
        who = f"netting set {self.netting_set}"
        for name in ("counterparty_threshold", "desk_threshold", "minimum_transfer_amount"):
            amount = getattr(self, name)
            if not (math.isfinite(amount) and amount >= 0.0):
                raise ValueError(f"{who}: the {name.replace('_', ' ')} must be a number from 0 up; got {amount}")
        for name in ("independent_amount", "collateral_spread"):
            if not math.isfinite(getattr(self, name)):
                raise ValueError(f"{who}: the {name.replace('_', ' ')} must be a finite number")
        if self.margin_period_days < 0:
            raise ValueError(f"{who}: the margin period must be 0 business days or more; got {self.margin_period_days}")
        self._refuse_idle_terms(who)

    def _refuse_idle_terms(self, who: str) -> None:
        """A term without effect is more likely a mistake in the kind of collateral than meant."""
        silent = self.collateral is Collateral.NONE
        idle = (
            (f"counterparty threshold of {self.counterparty_threshold:g}", not self.collateral.counterparty_posts),
            (f"desk threshold of {self.desk_threshold:g}", not self.collateral.desk_posts),
            (f"minimum transfer amount of {self.minimum_transfer_amount:g}", silent),
            (f"margin period of {self.margin_period_days} business days", silent),
        )
        given = (
            self.counterparty_threshold,
            self.desk_threshold,
            self.minimum_transfer_amount,
            self.margin_period_days,
        )
        for (term, has_no_effect), value in zip(idle, given, strict=True):
            if has_no_effect and value:
                raise ValueError(
                    f'{who}: a {term} has no effect with collateral "{self.collateral}": clear it or correct the kind '
                    "of collateral"
                )
