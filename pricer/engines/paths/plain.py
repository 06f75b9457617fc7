"""Legs in plain NumPy, from the trade's terms and not from the kernel's tables: what tests trust.

Every path is followed to where it is stopped. The path's common factor is integrated by doing so
at many values of it, in equal steps of probability: slow, and nothing could be simpler.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from pricer.engines.paths.leg import Event, Leg, Payment, Reading, When
from pricer.engines.paths.plan import PathProblem
from pricer.simulation.common_steps import CommonSteps

Array = NDArray[np.float64]


def hard_values(problem: PathProblem, rest: Array, common: Array) -> Array:
    """Value of every leg on every path, (n_legs, paths).

    ``rest`` : (n_dates, n_rest, paths) and ``common`` : (n_dates, paths) standard normals of the steps.
    """
    steps = CommonSteps.of(problem.law.times, problem.law.covariances)
    levels = np.exp(_log_levels(problem, steps, rest) + _common_moves(steps, common)[:, None, :])
    return np.stack([leg_values(leg, problem.legs, levels) for leg in problem.legs])


def smooth_values(problem: PathProblem, rest: Array, common: Array, nodes: int) -> Array:
    """As ``hard_values``, the mean over ``nodes`` values of the path's common factor instead of its own."""
    steps = CommonSteps.of(problem.law.times, problem.law.covariances)
    logs = _log_levels(problem, steps, rest)
    moves = _common_moves(steps, common)
    own = steps.projection @ np.diff(moves, axis=0, prepend=0.0)
    moves = moves - steps.shifts[:, None] * own
    out = np.zeros((len(problem.legs), rest.shape[2]))
    for w in ndtri((np.arange(nodes) + 0.5) / nodes):
        levels = np.exp(logs + (moves + steps.shifts[:, None] * w)[:, None, :])
        out += np.stack([leg_values(leg, problem.legs, levels) for leg in problem.legs])
    return out / nodes


def _log_levels(problem: PathProblem, steps: CommonSteps, rest: Array) -> Array:
    """Logarithms of all levels but for common moves, (n_dates, n, paths)."""
    law = problem.law
    roots = np.sqrt(np.diff(law.times, prepend=0.0))
    moves = np.einsum("tij,tjp->tip", steps.rest * roots[:, None, None], rest)
    out: Array = np.cumsum(moves, axis=0) + (np.log(law.forwards) - 0.5 * law.variances)[:, :, None]
    return out


def _common_moves(steps: CommonSteps, normals: Array) -> Array:
    """What moves all log-levels by each date, (n_dates, paths)."""
    roots = np.sqrt(np.diff(steps.times, prepend=0.0))
    out: Array = np.cumsum((steps.common * roots)[:, None] * normals, axis=0)
    return out


def _read(reading: Reading, date: int, levels: Array) -> Array:
    below = np.array(reading.references)[:, None]
    if reading.since is not None:
        below = below * levels[reading.since]
    return reading.aggregate((levels[date] / below).T)


def leg_values(leg: Leg, legs: tuple[Leg, ...], levels: Array) -> Array:
    """Discounted payments of one of ``legs`` on paths ``levels`` (n_dates, n, paths): (paths,)."""
    alive = np.ones(levels.shape[2], dtype=bool)
    running = np.full(levels.shape[2], leg.sum_so_far)
    value, missed = np.zeros(levels.shape[2]), np.zeros(levels.shape[2])
    for event, pays in _whole(leg, legs):
        up, down = _stops(event, levels)
        if event.fixing is not None:
            running = running + event.fixing.share * _read(event.fixing.reading, event.date, levels)
        for payment in event.payments if pays else ():
            chosen = {
                When.ALIVE: alive,
                When.SURVIVING: alive & ~up & ~down,
                When.STOPPED_ABOVE: alive & up,
                When.STOPPED_BELOW: alive & down,
            }[payment.when]
            level = _paid_on(payment, event, levels, running)
            value = value + payment.discount_factor * np.where(chosen, payment.payoff(level), 0.0)
        if event.coupon is not None and pays:
            missed = missed + event.coupon.amount
            paid = _read(event.coupon.trigger.reading, event.date, levels) > event.coupon.trigger.level
            value = value + event.coupon.discount_factor * np.where(alive & paid, missed, 0.0)
            missed = np.where(paid, 0.0, missed)
        alive = alive & ~up & ~down
    return value


@dataclass(frozen=True, slots=True)
class StopShares:
    """Of given paths, the shares that leave a leg at each of its events, (n_events,); they have no errors."""

    dates: NDArray[np.int64]
    above: Array
    below: Array
    above_errors: Array
    below_errors: Array
    life: float
    life_error: float
    stopped_above_error: float = 0.0
    stopped_below_error: float = 0.0


def stops(leg: Leg, levels: Array, times: Array) -> StopShares:
    """Where paths ``levels`` (n_dates, n, paths) at ``times`` leave a leg without a branch."""
    alive = np.ones(levels.shape[2], dtype=bool)
    above, below = [], []
    for event in leg.events:
        up, down = _stops(event, levels)
        above.append(float(np.mean(alive & up)))
        below.append(float(np.mean(alive & down)))
        alive &= ~up & ~down
    none = np.zeros(len(above))
    dates = np.array([event.date for event in leg.events], dtype=np.int64)
    saved = (np.array(above) + np.array(below)) @ (times[dates[-1]] - times[dates])
    life = float(times[dates[-1]] - saved)
    return StopShares(dates, np.array(above), np.array(below), none, none, life, 0.0)


def _stops(event: Event, levels: Array) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Which paths meet the stop above, and which of the others the one below, (paths,) each."""
    up = np.zeros(levels.shape[2], dtype=bool)
    down = np.zeros_like(up)
    if event.above is not None:
        up = _read(event.above.reading, event.date, levels) > event.above.level
    if event.below is not None:
        down = (_read(event.below.reading, event.date, levels) < event.below.level) & ~up
    return up, down


def _whole(leg: Leg, legs: tuple[Leg, ...]) -> list[tuple[Event, bool]]:
    """Events of a leg after those of the legs it branches off, and whether they pay to it."""
    own = [(event, True) for event in leg.events]
    if leg.branch is None:
        return own
    others = _whole(legs[leg.branch.leg], legs)
    return [(event, False) for event, _ in others if event.date < leg.branch.date] + own


def _paid_on(payment: Payment, event: Event, levels: Array, running: Array) -> Array:
    if payment.averaged:
        return running
    if payment.reading is None:
        return np.zeros(levels.shape[2])
    return _read(payment.reading, event.date, levels)
