"""Days, fixings and parts of contracts for tests: one observation a week from Monday 5 January 2026."""

from datetime import date, timedelta

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.contract import Contract
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.redemption import Redemption

NAMES = ("ORLUMA", "VESKA", "TARNIO")


def week(k):
    return date(2026, 1, 5) + timedelta(weeks=k)


def observed(k):
    """The observation of week k, paid two days later."""
    return Observation(week(k), week(k) + timedelta(days=2))


def fixings(rows, first=0, names=NAMES):
    """Fixings of weeks ``first``, ``first + 1``, ...: one row of levels per week, None for a missing one."""
    return Fixings.from_rows(
        Fixing(name, week(first + k), level)
        for k, row in enumerate(rows)
        for name, level in zip(names, row, strict=False)
        if level is not None
    )


def spots(*levels):
    return dict(zip(NAMES, levels, strict=False))


def contract(*features, n=2, weeks=4, payout=None, statistic=None, levels=None, aggregate=None, writer=None):
    """On the worst of ``n`` performances from 100, ending in week ``weeks``; redeems its level unless told."""
    aggregate = aggregate or Aggregate.worst_of(n)
    return Contract(
        levels or Levels(NAMES[:n], (100.0,) * n),
        statistic or ExpiryLevel(week(weeks), aggregate),
        payout or Redemption(capital=0.0, call_strike=0.0),
        observed(weeks),
        tuple(features),
        writer,
    )


def walked(statistic, levels):
    """The value of a statistic whose dates show the rows of ``levels``."""
    state = statistic.start()
    for day, row in zip(statistic.dates, statistic.measure(np.array(levels)).tolist(), strict=True):
        state = statistic.observe(state, day, row)
    return statistic.value(state)
