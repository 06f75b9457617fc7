"""Barrier options against Broadie, Glasserman & Kou (1997), constructed rows, and Heynen & Kat (1994); see the rows."""

from __future__ import annotations

import numpy as np

from pricer.engines.closed_form.barrier import Corridor, WatchedLevel, knock_out
from pricer.engines.closed_form.discrete_barrier import Observations
from pricer.engines.closed_form.discrete_barrier import knock_out as knock_out_on_dates
from pricer.engines.closed_form.external_barrier import knock_out_by_another
from tests.reference.checker import call_or_put, check, read

ROWS = read("barriers.csv")
TWO_ASSETS = [row for row in ROWS if row["case_id"].startswith("BA-2A")]
CONTINUOUS = [row for row in ROWS if row["monitoring"] == "continuous" and row not in TWO_ASSETS]
CORRECTED = [row for row in ROWS if row["monitoring"].startswith("continuous at shifted")]
ON_DATES = [row for row in ROWS if "dates" in row["monitoring"]]


def watched(row, asset=1):
    spot, years = float(row[f"s{asset}"]), float(row["t"])
    forward = spot * np.exp((float(row["r"]) - float(row[f"q{asset}"])) * years)
    return WatchedLevel(spot, forward, float(row[f"v{asset}"]) * years**0.5)


def corridor(row):
    barrier = float(row["barrier"])
    return Corridor(0.0, barrier) if "up_and" in row["product"] else Corridor(barrier)


def discounted(row, value):
    return float(np.exp(-float(row["r"]) * float(row["t"]))) * value


def continuous(row):
    return discounted(row, knock_out(watched(row), corridor(row), call_or_put(row).payoff()).value)


def corrected(row):
    level = watched(row)
    outer = corridor(row).widened(level.deviation / 50**0.5)
    return discounted(row, knock_out(level, outer, call_or_put(row).payoff()).value)


def on_dates(row):
    level, inside, dates = watched(row), corridor(row), int(row["monitoring"].split()[0])
    share = np.arange(1, dates + 1) / dates
    observations = Observations(
        level.spot * (level.forward / level.spot) ** share,
        level.deviation**2 * share,
        np.full(dates, inside.lower),
        np.full(dates, inside.upper),
        np.empty(0),
    )
    found = knock_out_on_dates(observations, level.forward, level.deviation**2, call_or_put(row).payoff())
    assert found.error < 1e-11
    return discounted(row, found.value)


def by_another(row):
    option = watched(row)
    found = knock_out_by_another(
        watched(row, 2), corridor(row), option.forward, option.deviation, float(row["rho"]), call_or_put(row).payoff()
    )
    return discounted(row, found.value)


METHODS = ((CONTINUOUS, continuous), (CORRECTED, corrected), (ON_DATES, on_dates), (TWO_ASSETS, by_another))


def test_published_barrier_options_are_met():
    assert sum(len(rows) for rows, _ in METHODS) == len(ROWS)
    for rows, method in METHODS:
        check(rows, method)


def test_recomputed_barrier_options_are_met_to_all_digits_given():
    for rows, method in METHODS:
        check(rows, method, against="recomputed_value", tolerance=5.1e-9)
