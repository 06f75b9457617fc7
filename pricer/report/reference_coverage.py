"""Which leading values an independent reference stands beside, under the model that leads.

A cross-check under the other model says that the engine samples well; it says nothing of the leading model's value.
"""

from __future__ import annotations

from collections.abc import Mapping, Set
from dataclasses import dataclass
from enum import StrEnum

from pricer.contracts.life_cycle import Status as Life
from pricer.engines.problem import ReferenceKind
from pricer.report.sums import ratio, total
from pricer.report.totals import priced
from pricer.run.outcome import Outcome


class Checked(StrEnum):
    """What stands beside a trade's leading value, under its own model; whether it agrees is the status's affair."""

    EXACT = "exact reference"
    BOUNDS = "bounds"  # one, or one on either side
    NOTHING = "no reference"
    SAMPLE = "independent sample"  # by other code and other draws
    KNOWN = "nothing to check"  # the trade has ended: what is left is decided


_ALWAYS_COUNTED = (Checked.EXACT, Checked.BOUNDS, Checked.NOTHING)
_BOUNDS = frozenset({ReferenceKind.LOWER_BOUND, ReferenceKind.UPPER_BOUND})


@dataclass(frozen=True, slots=True)
class CheckedTotal:
    """How many leading values of one model are checked by what, samples and ended trades only if there are any.

    ``value`` and ``unchecked_value``, that of those without any reference, are in the reporting currency.
    """

    model: str
    by: Mapping[Checked, int]
    value: float
    unchecked_value: float

    @property
    def trades(self) -> int:
        """Trades with a value."""
        return sum(self.by.values())

    @property
    def checked(self) -> int:
        """Those of them beside whose value an exact reference stands."""
        return self.by[Checked.EXACT]

    @property
    def independent(self) -> int:
        """Those beside which an exact reference or an independent sample stands."""
        return self.checked + self.by.get(Checked.SAMPLE, 0)

    @property
    def share(self) -> float:
        """The same in percent; NaN without a trade."""
        return 100.0 * ratio(self.checked, self.trades)


def checked(outcome: Outcome) -> dict[str, Checked]:
    """By trade, for every trade with a value: the strongest of what stands beside it; approximations check nothing."""
    kinds: dict[tuple[str, str], set[str]] = {}
    for check in outcome.cross_checks:
        kinds.setdefault((check.trade_id, check.model), set()).add(check.reference_kind)
    found = {}
    for v in priced(outcome):
        own = kinds.get((v.trade_id, v.model), set())
        found[v.trade_id] = Checked.KNOWN if v.life_status != Life.LIVE else _strongest(own)
    return found


def _strongest(kinds: Set[str]) -> Checked:
    if ReferenceKind.EXACT in kinds:
        return Checked.EXACT
    if ReferenceKind.SAMPLE in kinds:
        return Checked.SAMPLE
    return Checked.BOUNDS if kinds & _BOUNDS else Checked.NOTHING


def checked_total(outcome: Outcome, model: str = "") -> CheckedTotal:
    """Of the trades that ``model`` leads, or of all."""
    by_trade = checked(outcome)
    mine = [v for v in priced(outcome) if not model or v.model == model]
    found = [by_trade[v.trade_id] for v in mine]
    unchecked = [v.reporting_value for v, by in zip(mine, found, strict=True) if by is Checked.NOTHING]
    return CheckedTotal(
        model=model or "total",
        by={kind: found.count(kind) for kind in Checked if kind in _ALWAYS_COUNTED or kind in found},
        value=total(v.reporting_value for v in mine),
        unchecked_value=total(unchecked) if unchecked or not mine else 0.0,
    )


def checked_totals(outcome: Outcome) -> list[CheckedTotal]:
    """One a model that leads any trade, in their order of appearance, then that of all; empty without a value."""
    models = dict.fromkeys(v.model for v in priced(outcome))
    return [*(checked_total(outcome, model) for model in models), checked_total(outcome)] if models else []
