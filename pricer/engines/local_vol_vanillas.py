"""Vanilla options of one underlying in the simulated local-volatility model.

What a surface is worth shows in the options that it was made from: they are priced here on the paths of
trades (the same tables, scheme and kind of points), all expiries in one run. The lognormal option on
the same noise is the control variate; the steps are halved until that moves no volatility that matters.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.core.randomness import Purpose, stream
from pricer.engines.local_vol_problem import FlatVolatility
from pricer.market.black import out_of_the_money, vega
from pricer.simulation.batch_means import batch_estimate
from pricer.simulation.local_vol_tables import LocalVolatility
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]

#: Steps to the last expiry to begin with, as for trades, and at most.
_STEPS, _MOST_STEPS = 8, 128

#: A halving of steps that moves a volatility by less than this (0.02 vol points) leaves about a third of it.
_STEP_TOLERANCE = 2e-4

#: Deltas between which that is asked, of the option that is out of the money.
_WINGS = 0.1

_ROUNDING = 2.0**-22  # of levels in single precision


@dataclass(frozen=True, slots=True)
class VanillaSample:
    """Undiscounted options on X (forward 1) by expiry, out of the money: puts for log-strikes below 0, else calls.

    ``values``, ``errors``, ``step_differences`` : one array (n_strikes,) per expiry. ``errors`` are standard
    errors of ``degrees_of_freedom``; ``step_differences`` are values on these steps less those on half as many, about
    three times the bias left. ``means``, ``mean_errors`` : (n_expiries,) of X itself, 1 but for sampling.
    ``reached`` : do steps no longer matter between 10 and 90 delta?
    """

    values: tuple[Array, ...]
    errors: tuple[Array, ...]
    step_differences: tuple[Array, ...]
    means: Array
    mean_errors: Array
    steps: int
    paths: int
    reached: bool
    degrees_of_freedom: int


def reprice(
    surface: LocalVolatility,
    expiries: Sequence[float],
    log_strikes: Sequence[Array],
    *,
    group: str,
    seed: int,
    randomisations: int = 32,
    points: int = 2048,
) -> VanillaSample:
    """Price options of strikes ``exp(log_strikes[i])`` on X at ``expiries[i]`` years, increasing from above 0.

    ``surface`` : local volatility of X. ``points`` per randomisation, a multiple of 256. The result depends
    on the arguments only. Raises ValueError for expiries that do not increase.
    Safe to call from several threads.
    """
    if len(expiries) != len(log_strikes):
        raise ValueError(f"{len(expiries)} expiries do not fit {len(log_strikes)} rows of log-strikes")
    from pricer.simulation.local_vol_sampler import level_noise, local_vol_levels  # compiles kernels: when needed

    strikes = [np.asarray(k, dtype=float) for k in log_strikes]
    control, variances = _control(surface, expiries)
    deviations = np.sqrt(variances)
    one = np.ones((2, 2))  # both on the same noise
    steps = _STEPS
    while True:
        grid = TimeGrid.of(expiries, steps=steps)
        noise = level_noise(one, grid, stream(seed, group, Purpose.PRICE, 0), randomisations)
        fine, coarse = (
            local_vol_levels((surface, control), one, on, noise=noise, points=points) for on in (grid, grid.halved())
        )
        means, moves, controls = (list[Array]() for _ in range(3))
        for i, k in enumerate(strikes):
            first, second = (_time_values(levels[:, i], k) for levels in (fine, coarse))
            means.append(first[0])
            moves.append(first[0] - second[0])
            controls.append(first[1] - out_of_the_money(k, deviations[i]))
        found = [_estimate(m, c) for m, c in zip(means, controls, strict=True)]
        halving = [move.mean(axis=0) for move in moves]
        reached = all(
            bool(np.all(np.abs(h) <= _STEP_TOLERANCE * _weights(k, s, t)))
            for h, k, s, t in zip(halving, strikes, deviations, expiries, strict=True)
        )
        if reached or 2 * steps > _MOST_STEPS:
            break
        steps *= 2
    levels = fine[:, :, 0].mean(axis=2, dtype=float)
    of_control = fine[:, :, 1].mean(axis=2, dtype=float) - 1.0
    x, x_errors = _estimate(levels, of_control)
    return VanillaSample(
        values=tuple(value for value, _ in found),
        errors=tuple(error for _, error in found),
        step_differences=tuple(halving),
        means=x,
        mean_errors=x_errors,
        steps=grid.n_steps,
        paths=randomisations * points,
        reached=reached,
        degrees_of_freedom=randomisations - 2,
    )


def _control(surface: LocalVolatility, expiries: Sequence[float]) -> tuple[FlatVolatility, Array]:
    """A flat surface with the volatility at the forward, and its total variances at the expiries."""
    y = np.linspace(-surface.reach, surface.reach, surface.values.shape[1])
    central = np.maximum([np.interp(0.0, y, row) for row in surface.values], 1e-3)
    ends = np.append(surface.times[1:-1], max(surface.times[-1], expiries[-1]))
    times = np.concatenate([[0.0], ends])
    total = np.concatenate([[0.0], np.cumsum(central**2 * np.diff(times))])
    return FlatVolatility.of(times, total), np.interp(expiries, times, total)


def _time_values(levels: NDArray[np.float32], k: Array) -> tuple[Array, Array]:
    """Means per randomisation of options out of the money on both assets, two (randomisations, n_strikes).

    ``levels`` : (randomisations, 2, points).
    """
    out = np.empty((2, levels.shape[0], len(k)))
    for j, log_strike in enumerate(k):
        side = np.float32(1.0 if log_strike >= 0.0 else -1.0)
        gain = np.maximum(side * (levels - np.float32(np.exp(log_strike))), np.float32(0.0))
        out[:, :, j] = gain.mean(axis=2, dtype=float).T
    return out[0], out[1]


def _estimate(means: Array, controls: Array) -> tuple[Array, Array]:
    size = np.maximum(np.abs(controls).max(axis=0), 1e-12)
    value, error = batch_estimate(means, controls / size, _ROUNDING)
    return value, np.hypot(error, _ROUNDING)


def _weights(k: Array, deviation: float, years: float) -> Array:
    """Value per unit of volatility; without bound beyond the wings, where steps are not asked to matter."""
    d = -k / deviation + 0.5 * deviation
    from scipy.special import ndtr

    out: Array = np.where(np.minimum(ndtr(d), ndtr(-d)) >= _WINGS, vega(k, deviation) * np.sqrt(years), np.inf)
    return out
