"""Vanilla options of one underlying in the simulated local-volatility model.

What a surface is worth shows in the options that it was made from: they are priced here on the paths of
trades (the same tables, scheme and kind of points), all expiries in one run. The lognormal option on
the same noise is the control variate; the steps are halved until they leave no more than what matters of a volatility.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from pricer.core.randomness import Purpose, stream
from pricer.engines.local_vol_paths import grid_of
from pricer.market.black import out_of_the_money, vega
from pricer.simulation.batch_means import batch_estimate_with
from pricer.simulation.local_vol_estimates import EXTRAPOLATION, step_bias
from pricer.simulation.local_vol_tables import LocalVolatility
from pricer.simulation.path_noise import PathNoise

Array = NDArray[np.float64]

#: Steps to the last expiry to begin with, dealt out as for a trade; and how often they may be doubled.
_STEPS, _DOUBLINGS = 32, 3

#: Points per randomisation that tell how much steps matter: the difference is on common draws.
_POINTS_FOR_STEPS = 8192

#: Steps are doubled until they leave less than this of a volatility (0.005 vol points).
_STEP_TOLERANCE = 5e-5

#: Deltas between which that is asked, of the option that is out of the money.
_WINGS = 0.1

_ROUNDING = 2.0**-22  # of levels in single precision


@dataclass(frozen=True, slots=True)
class VanillaSample:
    """Undiscounted options on X (forward 1) by expiry, out of the money: puts for log-strikes below 0, else calls.

    ``values``, ``errors``, ``step_biases`` : one array (n_strikes,) per expiry. ``errors`` are standard errors of
    ``degrees_of_freedom``; values are extrapolated like a trade's, and ``step_biases`` is what to allow them for
    their steps, likewise as standard errors. ``means``, ``mean_errors`` : (n_expiries,) of X itself, 1 but for
    sampling. ``reached`` : do steps no longer matter between 10 and 90 delta?
    """

    values: tuple[Array, ...]
    errors: tuple[Array, ...]
    step_biases: tuple[Array, ...]
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
    points: int = 16384,
) -> VanillaSample:
    """Price options of strikes ``exp(log_strikes[i])`` on X at ``expiries[i]`` years, increasing from above 0.

    ``surface`` : local volatility of X. ``points`` per randomisation, a multiple of 256. The result depends
    on the arguments only. Raises ValueError for expiries that do not increase.
    Safe to call from several threads.
    """
    if len(expiries) != len(log_strikes):
        raise ValueError(f"{len(expiries)} expiries do not fit {len(log_strikes)} rows of log-strikes")
    from pricer.simulation.vanilla_sampler import vanilla_means  # compiles kernels: when needed

    strikes = [np.asarray(k, dtype=float) for k in log_strikes]
    width = max((len(k) for k in strikes), default=0)
    table = np.stack([np.pad(k, (0, width - len(k))) for k in strikes])
    variances = _variances(surface, expiries)
    known = np.concatenate([np.ones((len(table), 1)), out_of_the_money(table, np.sqrt(variances)[:, None])], axis=1)
    weights = _weights(table, np.sqrt(variances)[:, None], np.sqrt(np.asarray(expiries, dtype=float))[:, None])
    one = np.ones((1, 1))
    for level in range(_DOUBLINGS + 1):
        grid = grid_of(expiries, (), steps=_STEPS, level=level, every=True)
        draws = stream(seed, group, Purpose.PRICE, 0)
        noise = PathNoise(grid, one, one[0], draws, randomisations, every_date=True)
        few = min(points, _POINTS_FOR_STEPS)
        fine, coarse, coarsest = (
            vanilla_means(surface, on, noise, table, variances, few)
            for on in (grid, grid.halved(), grid.halved().halved())
        )
        last = fine - coarse
        moved = last + EXTRAPOLATION * (last - (coarse - coarsest))
        halving, halving_noise = (x[:, 1:] for x in _estimate(last[:, :, 0], last, 0.0))
        disagreement, noise_of_it = (x[:, 1:] for x in _estimate(moved[:, :, 0], moved, 0.0))
        sure = step_bias(
            np.maximum(np.abs(halving) - 2.0 * halving_noise, 0.0),
            np.maximum(np.abs(disagreement) - 2.0 * noise_of_it, 0.0),
        )
        reached = bool(np.all(sure <= _STEP_TOLERANCE * weights))
        if reached:
            break
    sums = vanilla_means(surface, grid, noise, table, variances, points)
    extrapolated = sums[:, :, 0].copy()
    extrapolated[:, :, 1:] += EXTRAPOLATION * last[:, :, 0, 1:]
    value, error = _estimate(extrapolated, sums, known)
    biases = step_bias(halving, disagreement)
    return VanillaSample(
        values=tuple(v[1 : 1 + len(k)] for v, k in zip(value, strikes, strict=True)),
        errors=tuple(e[1 : 1 + len(k)] for e, k in zip(error, strikes, strict=True)),
        step_biases=tuple(b[: len(k)] for b, k in zip(biases, strikes, strict=True)),
        means=value[:, 0],
        mean_errors=error[:, 0],
        steps=grid.n_steps,
        paths=randomisations * points,
        reached=reached,
        degrees_of_freedom=randomisations - 2,
    )


def _variances(surface: LocalVolatility, expiries: Sequence[float]) -> Array:
    """Total variances at the expiries of the volatility at the forward: of the lognormal control."""
    y = np.linspace(-surface.reach, surface.reach, surface.values.shape[1])
    central = np.maximum([np.interp(0.0, y, row) for row in surface.values], 1e-3)
    times = np.append(surface.times[:-1], max(surface.times[-1], expiries[-1]))
    total = np.concatenate([[0.0], np.cumsum(central**2 * np.diff(times))])
    return np.asarray(np.interp(expiries, times, total))


def _estimate(means: Array, sums: Array, known: Array | float) -> tuple[Array, Array]:
    """Estimates and errors of ``means`` (randomisations, n_dates, 1 + n_strikes): two (n_dates, 1 + n_strikes).

    ``sums`` : see ``vanilla_means``. Controls are the same numbers of the lognormal level, of means ``known``, and for
    options X itself, of mean 1, under local volatility.
    """
    n, shape = len(means), means.shape[1:]
    of_lognormal = sums[:, :, 1] - known
    of_x = sums[:, :, 0, [0]] - (1.0 if np.ndim(known) else 0.0)
    of_x = np.broadcast_to(of_x, of_lognormal.shape).copy()
    of_x[:, :, 0] = 0.0  # X is no control of its own mean
    controls = np.stack([of_lognormal, of_x], axis=-1)
    controls = controls / np.maximum(np.abs(controls).max(axis=0), 1e-300)
    value, error = batch_estimate_with(means.reshape(n, -1), controls.reshape(n, -1, controls.shape[-1]))
    return value.reshape(shape), np.hypot(error, _ROUNDING).reshape(shape)


def _weights(k: Array, deviations: Array, roots: Array) -> Array:
    """Value per unit of volatility; without bound beyond the wings, where steps are not asked to matter."""
    d = -k / deviations + 0.5 * deviations
    out: Array = np.where(np.minimum(ndtr(d), ndtr(-d)) >= _WINGS, vega(k, deviations) * roots, np.inf)
    return out
