"""A fitted exercise rule: continuation values as frozen functions of the state."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.early_exercise import kernels
from pricer.engines.early_exercise.decision_inputs import FIRST_INPUT, DateInputs
from pricer.engines.early_exercise.dynamics import Successors
from pricer.regression.least_squares import Fit
from pricer.regression.polynomial import PolynomialBasis

Array = NDArray[np.float64]
Singles = NDArray[np.float32]

#: Lanes of inner successors worked on together: their levels stay in the second-level cache.
LANES = 2048

#: Lanes that share one set of inner points, at least: making a set must not cost more than using it.
_SET = 256

#: The same for many assets: states to a set, one for so many assets.
_ASSETS = 10


@dataclass(frozen=True, slots=True)
class Continuation:
    """The value of going on at one date, in time-0 money: a polynomial of the inputs, held within limits.

    It is at least ``floor``, and differs from the best single later date, as the frozen shocks see it, by ``least``
    to ``most``: what a polynomial says of states beside those it was fitted to must not be trusted far.
    """

    basis: PolynomialBasis
    coefficients: Singles
    floor: float
    least: float
    most: float

    def __call__(self, inputs: Singles, horizons: int) -> Singles:
        """At ``inputs`` (n_inputs, lanes), the last ``horizons`` of them the averages over frozen shocks."""
        out = np.empty(inputs.shape[1], dtype=np.float32)
        self.basis.combined(self.coefficients, inputs, out)
        kernels.hold(inputs, horizons, self.floor, self.least, self.most, out)
        return out


@dataclass(frozen=True, slots=True)
class DateValue:
    """Payoff, income and continuation at one date; None for a continuation at the last."""

    inputs: DateInputs
    continuation: Continuation | None

    def rows(self, levels: Singles) -> Singles:
        """Payoff, income and inputs, (rows, lanes)."""
        out = np.empty((self.inputs.rows, levels.shape[1]), dtype=np.float32)
        self.inputs.fill(levels, out)
        return out

    def going_on(self, rows: Singles) -> Singles:
        """The continuation value, (lanes,)."""
        if self.continuation is None:
            raise ValueError("nothing goes on after the last date")
        return self.continuation(rows[FIRST_INPUT:], len(self.inputs.shocks))

    def value(self, levels: Singles) -> Singles:
        """``max(payoff, continuation)`` and the date's income, (lanes,)."""
        rows = self.rows(levels)
        out: Singles = rows[0]
        if self.continuation is not None:
            out = np.maximum(out, self.going_on(rows))
        out += rows[1]
        return out

    def expected(
        self, date: int, states: Singles, successors: Successors, inner: int, stream: np.random.Generator
    ) -> Array:
        """Averages of ``value`` over ``inner`` successors of ``states`` (n, P) one date before, (P,): unbiased."""
        n, points = states.shape
        together = max(LANES // inner, 1)
        shared = min(max(_SET // inner, -(-n // _ASSETS), 1), together)
        out = np.empty(points)
        levels = np.empty((n, min(together, points) * inner), dtype=np.float32)
        for start in range(0, points, together):
            part = states[:, start : start + together]
            if part.shape[1] * inner != levels.shape[1]:
                levels = np.empty((n, part.shape[1] * inner), dtype=np.float32)
            for s in range(0, part.shape[1], shared):
                successors.fill(date, part[:, s : s + shared], stream, s * inner, levels)
            out[start : start + together] = self.value(levels).reshape(-1, inner).mean(axis=1, dtype=float)
        return out


@dataclass(frozen=True, slots=True)
class FittedRule:
    """The value at each date, and how each fit did; no fit at the last date."""

    dates: list[DateValue]
    fits: list[Fit]
