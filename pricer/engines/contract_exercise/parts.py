"""What a right to exercise is about: amounts by day, all as functions of one aggregate.

Amounts that are paid whatever the levels are summed up to the day of exercise; those that depend on
the levels are income on the way. Everything is in money of tonight: amounts times the discount factors of
their payment dates.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.barrier import Barrier, BarrierKind, BarrierState
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons, CouponState
from pricer.contracts.exercise import Exercise, ExercisedBy, ExerciseStyle
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Payout
from pricer.contracts.observation import Observation
from pricer.contracts.profile import PiecewiseLinear
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_exercise.functions import constant, joined, plus, summed
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.early_exercise.problem import Right
from pricer.engines.not_covered import NotCovered


@dataclass(frozen=True, slots=True)
class ExerciseParts:
    """``aggregate`` without cash level, of levels (prices over references); ``rights`` to come, today's included.

    ``end`` is the day on which ``final``, a function of the aggregate, is paid at the latest; ``fixed`` amounts
    and ``incomes`` by day are paid to a contract that was not ended before, those of ``after_decision`` not on the
    day of exercise itself.
    """

    right: Right
    style: ExerciseStyle
    aggregate: Aggregate
    exercise: Exercise
    rights: tuple[Observation, ...]
    end: date
    final: PiecewiseLinear
    fixed: tuple[tuple[date, float], ...]
    incomes: tuple[tuple[date, PiecewiseLinear], ...]
    after_decision: bool

    def payout(self, right: Observation, discount: float) -> PiecewiseLinear:
        """What exercise on that day pays, with the fixed amounts paid until then; ``discount`` of its payment."""
        paid = sum(
            amount for day, amount in self.fixed if day < right.day or (day == right.day and not self.after_decision)
        )
        return plus(self._exercised(right.day).scaled(discount), paid)

    def at_end(self) -> PiecewiseLinear:
        """What the contract pays if it is never ended early, incomes left out."""
        return plus(self.final, sum(amount for _, amount in self.fixed))

    def _exercised(self, day: date) -> PiecewiseLinear:
        exercise = self.exercise
        if exercise.amounts is not None:
            last = sum(right.day <= day for right in exercise.rights) - 1
            return constant(exercise.amounts[last])
        assert exercise.payout is not None  # a right pays one or the other
        return on_core(exercise.payout.payoff(), exercise.aggregate)


def exercise_parts(terms: ContractTerms) -> ExerciseParts:
    """Raises :class:`NotCovered` with the reason, a clause for the reader."""
    contract, as_of = terms.as_of.contract, terms.as_of
    exercise = _the_right(contract)
    statistic = contract.statistic
    if not isinstance(statistic, ExpiryLevel) or statistic.day != contract.expiry.day:
        raise NotCovered(
            f"a right to exercise beside the statistic {statistic.label or 'of an earlier day'} is not priced: "
            "only the level at expiry"
        )
    if as_of.references is None:
        raise NotCovered("a right to exercise is not priced while references are still to be set")
    if contract.writer is not None and contract.writer.structural is not None:
        raise NotCovered("a right to exercise against a writer whose assets are modelled is not priced")
    aggregate = _core(statistic.aggregate)
    if exercise.payout is not None and _core(exercise.aggregate) != aggregate:
        raise NotCovered("exercise pays on another aggregate than expiry, which is not priced")
    final = _final(terms, statistic.aggregate)
    announced = exercise.exercised
    end = contract.expiry.day if announced is None else announced.day
    coupons = [
        (i, feature, state)
        for i, (feature, state) in enumerate(zip(contract.features, as_of.progress.features, strict=True))
        if isinstance(feature, Coupons) and isinstance(state, CouponState)
    ]
    place = contract.features.index(exercise)
    sides = {i > place for i, _, _ in coupons}
    if len(sides) > 1:
        raise NotCovered("coupons before and after the right to exercise of a day are not priced together")
    fixed: list[tuple[date, float]] = []
    incomes: list[tuple[date, PiecewiseLinear]] = []
    for _, feature, state in coupons:
        _take_coupons(terms, feature, state, aggregate, exercise, fixed, incomes)
    rights = tuple(right for right in exercise.rights if right.day >= as_of.valuation_date)
    after = sides == {True}
    if after and {right.day for right in rights} & {day for day, _ in incomes}:
        raise NotCovered("a conditional coupon of a day of exercise must be decided before it to be priced")
    return ExerciseParts(
        Right.HOLDER if exercise.by is ExercisedBy.HOLDER else Right.ISSUER,
        exercise.style,
        aggregate,
        exercise,
        rights,
        end,
        final,
        tuple(item for item in sorted(fixed) if item[0] <= end),
        tuple(
            (day, summed([f for d, f in incomes if d == day])) for day in sorted({d for d, _ in incomes if d <= end})
        ),
        after,
    )


def on_core(payoff: PiecewiseLinear, aggregate: Aggregate) -> PiecewiseLinear:
    """The payoff as a function of the aggregate without its cash level."""
    if aggregate.cash is None:
        return payoff
    if aggregate.kind is AggregateKind.BEST_OF:
        return payoff.of_floored_argument(aggregate.cash)
    return payoff.of_capped_argument(aggregate.cash)


def _core(aggregate: Aggregate) -> Aggregate:
    """Without its cash level; of one asset always a weighted sum."""
    weights = aggregate.weights
    if len(weights) == 1 and (aggregate.is_ranked or weights == (1.0,)):
        return Aggregate.weighted_sum(weights)
    return Aggregate(aggregate.kind, weights)


def _the_right(contract: Contract) -> Exercise:
    found = [feature for feature in contract.features if isinstance(feature, Exercise)]
    if len(found) != 1:
        raise NotCovered(f"{len(found)} rights to exercise in one contract are not priced")
    for feature in contract.features:
        if not isinstance(feature, Exercise | Coupons | Barrier):
            raise NotCovered(f"a right to exercise beside the feature {feature.label} is not priced")
    return found[0]


def _final(terms: ContractTerms, full: Aggregate) -> PiecewiseLinear:
    """What is paid at expiry, a barrier that looks at expiry alone included; ``full`` has its cash level."""
    contract, aggregate = terms.as_of.contract, _core(full)
    payment = terms.discount(contract.expiry.payment_date)

    def paid(payout: Payout) -> PiecewiseLinear:
        return on_core(payout.payoff(), full).scaled(payment)

    barriers = [
        (i, feature, state)
        for i, (feature, state) in enumerate(zip(contract.features, terms.as_of.progress.features, strict=True))
        if isinstance(feature, Barrier) and isinstance(state, BarrierState)
    ]
    final = paid(contract.payout)
    for i, barrier, state in reversed(barriers):  # the first that is not in force decides
        to_come = terms.as_of.appointments(i)
        if state.hit_on is not None or not to_come:
            instead = barrier.payout_instead(state)
            final = final if instead is None else paid(instead)
            continue
        if barrier.continuous or [item.day for item in to_come] != [contract.expiry.day]:
            raise NotCovered("a right to exercise beside a barrier that is watched before expiry is not priced")
        level = _on(to_come[0].level, barrier.trigger, aggregate)
        untouched = paid(barrier.instead)
        if barrier.rebate_at_hit is not None and to_come[0].payment_date is not None:
            hit, untouched = constant(barrier.rebate_at_hit * terms.discount(to_come[0].payment_date)), final
        elif barrier.kind is BarrierKind.IN:
            hit = final
        else:
            hit, untouched = untouched, final
        up = barrier.trigger.direction is Direction.UP
        final = joined(untouched, level, hit) if up else joined(hit, level, untouched)
    return final


def _on(level: float | None, trigger: Trigger, aggregate: Aggregate) -> float:
    """The trigger's level on ``aggregate``; raises :class:`NotCovered` for one that looks at something else."""
    assert level is not None  # a trigger always has one
    scales = set(trigger.scales or (1.0,))
    alike = len(scales) == 1 and trigger.aggregate.cash is None and _core(trigger.aggregate) == aggregate
    if not alike or (scales != {1.0} and aggregate.kind is AggregateKind.GEOMETRIC):
        raise NotCovered("a right to exercise beside a trigger on another aggregate than the payout's is not priced")
    return level * scales.pop()


def _take_coupons(
    terms: ContractTerms,
    feature: Coupons,
    state: CouponState,
    aggregate: Aggregate,
    exercise: Exercise,
    fixed: list[tuple[date, float]],
    incomes: list[tuple[date, PiecewiseLinear]],
) -> None:
    """Add what the coupons to come pay, known amounts and conditional ones."""
    to_come = feature.coupons[state.decided :]
    conditional = [coupon for coupon in to_come if coupon.level is not None]
    if feature.memory and len(conditional) > 1:
        raise NotCovered("coupons with memory beside a right to exercise are not priced")
    rights = [right.day for right in exercise.rights]
    memory, seen, within = state.memory, state.days_seen, state.days_in_range
    for coupon in to_come:
        worth = terms.discount(coupon.payment_date)
        if coupon.level is None or feature.trigger is None:
            fixed.append((coupon.day, (coupon.amount + memory) * worth))
            memory = 0.0
            continue
        level = _on(coupon.level, feature.trigger, aggregate)
        if not coupon.accrual_dates:
            paid = _digital(feature.trigger.direction, level, (coupon.amount + memory) * worth)
            incomes.append((coupon.day, paid))
            continue
        days = coupon.accrual_dates[seen:]
        _refuse_broken_accrual(coupon, days, rights, exercise.style)
        part = coupon.amount * worth / len(coupon.accrual_dates)
        fixed.append((coupon.day, part * within))
        ceiling = None if coupon.ceiling is None else _on(coupon.ceiling, feature.trigger, aggregate)
        incomes.extend((day, _range(feature.trigger.direction, level, ceiling, part)) for day in days)
        seen = within = 0


def _refuse_broken_accrual(coupon: Coupon, days: tuple[date, ...], rights: list[date], style: ExerciseStyle) -> None:
    """Accrued amounts are lost if the contract ends before the coupon's day: then they are no income of their days."""
    first = days[0] if days else coupon.day
    broken = any(first <= day < coupon.day for day in rights)
    if style is ExerciseStyle.AMERICAN:
        broken = rights[0] < coupon.day and first <= rights[-1]
    if broken:
        raise NotCovered("a right to exercise within an accrual period is not priced")


def _digital(direction: Direction, level: float, amount: float) -> PiecewiseLinear:
    if direction is Direction.UP:
        return PiecewiseLinear(0.0, 0.0, (level,), (0.0,), (amount,))
    return PiecewiseLinear(amount, 0.0, (level,), (0.0,), (-amount,))


def _range(direction: Direction, level: float, ceiling: float | None, amount: float) -> PiecewiseLinear:
    if ceiling is None:
        return _digital(direction, level, amount)
    if ceiling <= level:
        return constant(0.0)
    return PiecewiseLinear(0.0, 0.0, (level, ceiling), (0.0, 0.0), (amount, -amount))
