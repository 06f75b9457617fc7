"""Where simulated paths leave the legs, and how long they live."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.stepwise.tables import LegTables
from pricer.simulation.batch_means import batch_estimate

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Stops:
    """Where paths leave a leg, as ``ContractLegs.life_of`` asks for it."""

    dates: NDArray[np.int64]
    above: Array
    above_errors: Array
    below: Array
    below_errors: Array
    life: float
    life_error: float
    stopped_above_error: float
    stopped_below_error: float


def stops_of(shares: Array, tables: LegTables, years: Array) -> list[Stops]:
    """Leg by leg, of ``shares`` (randomisations, n_stops, 2) of paths stopped above and below; ``years`` (n_dates,)."""
    up, up_errors = batch_estimate(shares[:, :, 0])
    down, down_errors = batch_estimate(shares[:, :, 1])
    out = []
    for dates, rows in zip(tables.dates, tables.rows, strict=True):
        of_leg, ends = shares[:, rows], years[dates]
        saved = of_leg.sum(axis=2) @ (ends[-1] - ends)
        (life,), (life_error,) = batch_estimate((ends[-1] - saved)[:, None])
        _, whole_errors = batch_estimate(of_leg.sum(axis=1))
        found = up[rows], up_errors[rows], down[rows], down_errors[rows], float(life), float(life_error)
        out.append(Stops(dates, *found, *whole_errors.tolist()))
    return out
