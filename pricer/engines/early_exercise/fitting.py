"""Backward regression: the rule from the last date to the first.

With v the value at the next date as already fitted and L what its rule earns on the path, the target at a date is
``E[v(next) | state] + L(next) - v(next)``. The first term is an average over inner successors, nearly free of
noise; the second keeps errors of later fits from piling up: its mean is what following the rule is worth less what the
fit says it is. (Longstaff & Schwartz 2001 regress L alone; taking off the martingale part ``v - E v`` first is a
control variate, as in Belomestny, Bender & Schoenmakers 2009.)
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.early_exercise.decision_inputs import FIRST_INPUT, DateInputs
from pricer.engines.early_exercise.dynamics import Dynamics, Successors, checked_sizes
from pricer.engines.early_exercise.rule import Continuation, DateValue, FittedRule
from pricer.regression.least_squares import Fit, NormalEquations, fit
from pricer.regression.polynomial import PolynomialBasis

Array = NDArray[np.float64]
Singles = NDArray[np.float32]

#: One in so many blocks of paths is held out.
_HELD_OUT = 8

#: Exercised states count half where their payoff exceeds the continuation by so many errors of the first fit.
_NEAR = 2.0

#: An error below this part of the targets is rounding.
_ROUNDING = 1e-7

#: Fitted values are held between the quantiles, over the anchor, that leave this share of the sample on either side.
_BEYOND = 1e-3


@dataclass(frozen=True, slots=True)
class FitSettings:
    """``blocks`` randomisations of ``points`` paths, ``inner`` successors each, polynomials of total ``degree``.

    Raises ValueError for fewer than ``_HELD_OUT`` blocks, or sizes that the sampler does not have.
    """

    blocks: int = 16
    points: int = 512
    inner: int = 128
    degree: int = 3

    def __post_init__(self) -> None:
        if self.blocks < _HELD_OUT:
            raise ValueError(f"at least {_HELD_OUT} blocks, one of them held out; got {self.blocks}")
        checked_sizes(self.points, self.inner)


class _Block:
    """One randomisation of paths on its way back: values and earnings at the date last worked on."""

    def __init__(self, dynamics: Dynamics, settings: FitSettings, stream: np.random.Generator) -> None:
        self.stream = stream
        self.settings = settings
        self.paths: Singles = dynamics.paths(stream, settings.points)
        self.successors: Successors = dynamics.successors(settings.inner)
        self.rows: Singles = np.empty((0, settings.points), dtype=np.float32)
        self.target: Array = np.empty(settings.points)
        self.value: Array = np.empty(settings.points)
        self.earned: Array = np.empty(settings.points)

    def end(self, last: DateValue) -> None:
        self.value = self.earned = last.value(self.paths[-1]).astype(float)

    def aim(self, date: int, inputs: DateInputs, following: DateValue) -> None:
        """Inputs and targets at ``date``."""
        self.rows = DateValue(inputs, None).rows(self.paths[date])
        expected = following.expected(date + 1, self.paths[date], self.successors, self.settings.inner, self.stream)
        self.target = expected + (self.earned - self.value)

    def follow(self, here: DateValue) -> None:
        """Value and earnings under the rule just fitted."""
        payoff, income = self.rows[0].astype(float), self.rows[1].astype(float)
        on = here.going_on(self.rows).astype(float)
        self.value = np.maximum(payoff, on) + income
        self.earned = np.where(payoff > on, payoff, self.target) + income


def fit_rule(
    dynamics: Dynamics,
    inputs: Sequence[DateInputs],
    settings: FitSettings,
    floors: Array,
    streams: Callable[[int], np.random.Generator],
    pool: ThreadPoolExecutor,
) -> FittedRule:
    """Fit from the last date back.

    ``streams(block)`` makes each block's generator; ``floors`` : (n_dates,) the least each continuation can be.
    """
    last = len(inputs) - 1
    following = DateValue(inputs[last], None)
    blocks = list(pool.map(lambda b: _Block(dynamics, settings, streams(b)), range(settings.blocks)))
    dates: list[DateValue] = [following]
    fits: list[Fit] = []
    for block in blocks:
        block.end(following)
    for date in range(last - 1, -1, -1):
        _each(pool, blocks, _Block.aim, date, inputs[date], following)
        sample = np.concatenate([block.rows[FIRST_INPUT:] for block in blocks[: max(len(blocks) // 4, 1)]], axis=1)
        basis = PolynomialBasis.of(sample, settings.degree, free=len(inputs[date].shocks))
        result, continuation = _fitted_twice(basis, blocks, len(inputs[date].shocks), float(floors[date]), pool)
        following = DateValue(inputs[date], continuation)
        _each(pool, blocks, _Block.follow, following)
        dates.append(following)
        fits.append(result)
    return FittedRule(dates[::-1], fits[::-1])


def _each(pool: ThreadPoolExecutor, blocks: Sequence[_Block], method: Callable[..., None], *arguments: object) -> None:
    """Call ``method`` of every block; the first exception is raised."""
    list(pool.map(lambda block: method(block, *arguments), blocks))


def _fitted_twice(
    basis: PolynomialBasis, blocks: Sequence[_Block], horizons: int, floor: float, pool: ThreadPoolExecutor
) -> tuple[Fit, Continuation]:
    """Fit, and fit again with less weight on what lies deep among the exercised states.

    There only the payoff matters, and its size would govern the fit where the decision is close.
    """
    functions = list(pool.map(lambda block: basis(block.rows[FIRST_INPUT:]), blocks))
    first = _fitted(basis.size, blocks, functions, [None] * len(blocks), pool)
    largest = max(float(np.max(np.abs(block.target))) for block in blocks)
    scale = _NEAR * max(first.held_out_error, _ROUNDING * largest, 1e-300)
    excess = [block.rows[0] - first.coefficients @ part for block, part in zip(blocks, functions, strict=True)]
    weights = [1.0 / (1.0 + (np.maximum(x, 0.0) / scale) ** 2) for x in excess]
    result = _fitted(basis.size, blocks, functions, weights, pool)
    anchors = [block.rows[-horizons:].max(axis=0) for block in blocks]
    apart = [result.coefficients @ part - anchor for part, anchor in zip(functions, anchors, strict=True)]
    least, most = np.quantile(np.concatenate(apart), [_BEYOND, 1.0 - _BEYOND])
    limits = floor, float(least), float(most)
    return result, Continuation(basis, result.coefficients.astype(np.float32), *limits)


def _fitted(
    size: int,
    blocks: Sequence[_Block],
    functions: Sequence[Singles],
    weights: Sequence[Array | None],
    pool: ThreadPoolExecutor,
) -> Fit:
    def summed(b: int) -> NormalEquations:
        out = NormalEquations(size)
        out.add(functions[b], blocks[b].target, weights[b])
        return out

    seen, held_out = NormalEquations(size), NormalEquations(size)
    for b, part in enumerate(pool.map(summed, range(len(blocks)))):  # in block order: sums repeat to the last bit
        if b % _HELD_OUT == _HELD_OUT - 1:
            held_out = held_out + part
        else:
            seen = seen + part
    return fit(seen, held_out)
