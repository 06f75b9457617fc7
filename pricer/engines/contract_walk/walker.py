"""The bulk walk: many paths of prices through one contract, date by date."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.ageing import Progress
from pricer.contracts.contract import Contract
from pricer.contracts.feature import Ending
from pricer.contracts.levels import references
from pricer.engines.contract_walk import features as path_features
from pricer.engines.contract_walk import statistics as path_statistics
from pricer.engines.contract_walk.between_dates import Watch
from pricer.engines.contract_walk.bulk import paid
from pricer.engines.contract_walk.ledger import Ledger

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: The endings by their number in :class:`Ends`.
ENDINGS = (Ending.EXPIRED, Ending.CALLED, Ending.KNOCKED_OUT, Ending.EXERCISED)


@dataclass(frozen=True, slots=True)
class Ends:
    """How each path ended: ``places`` (n_paths,) of its last date, ``kinds`` (n_paths,) numbers into ``ENDINGS``.

    ``hit`` (n_paths,) whether a barrier was hit before that, None for a contract without one.
    """

    places: NDArray[np.int64]
    kinds: NDArray[np.int8]
    hit: Mask | None


def walk_paths(
    contract: Contract,
    progress: Progress,
    dates: Sequence[date],
    prices: Array,
    ledger: Ledger,
    watches: Sequence[Watch | None] = (),
) -> Ends:
    """Tell ``ledger`` what ``contract`` in the state ``progress`` pays on ``prices`` (n_dates, n_assets, n_paths).

    ``dates`` are the contract's dates after ``progress``, up to its expiry. The payments are those of
    ``ageing.walk``, path by path. ``watches`` has one entry per feature for barriers watched between the dates, None
    for others; empty: none is. Raises TypeError for a right to exercise that nobody has used, ValueError where a
    statistic has no value on some path.
    """
    paths = prices.shape[2]
    reference = _references(contract, progress, dates, prices)
    statistic = path_statistics.begin(contract.statistic, progress.statistic)
    watches = watches or (None,) * len(contract.features)
    found = zip(contract.features, progress.features, watches, strict=True)
    features = [path_features.begin(feature, state, paths, watch) for feature, state, watch in found]
    seen = frozenset(contract.statistic.dates)
    own = [frozenset(feature.dates) for feature in contract.features]
    everything = seen.union(*own)

    alive = np.ones(paths, dtype=bool)
    places, kinds = np.full(paths, len(dates) - 1), np.zeros(paths, dtype=np.int8)
    for place, day in enumerate(dates):
        if day not in everything:
            continue
        levels = prices[place] / reference
        if day in seen:
            statistic.observe(day, levels)
        for feature, mine in zip(features, own, strict=True):
            if day not in mine:
                continue
            ended = feature.observe(day, place, levels, alive, ledger)
            if ended is not None and ended.any():
                places[ended], kinds[ended] = place, ENDINGS.index(feature.ending)
                alive = alive & ~ended
        if not alive.any():
            break
    if alive.any():
        level = statistic.value(paths)
        payoff = paid(contract.payout, level)
        for feature in reversed(features):  # the first that puts something in its place decides
            payoff = feature.replaced(payoff, level)
        ledger.pay(contract.expiry.day, contract.expiry.payment_date, payoff, alive)
    hits = [hit for hit in (feature.hit() for feature in features) if hit is not None]
    return Ends(places, kinds, np.logical_or.reduce(hits) if hits else None)


def _references(contract: Contract, progress: Progress, dates: Sequence[date], prices: Array) -> Array:
    """References of each path, (n_assets, 1) where known tonight, else (n_assets, n_paths)."""
    known = references(contract.levels, progress.references)
    if known is not None:
        return known[:, None]
    setting = set(contract.levels.setting_dates)
    places = [place for place, day in enumerate(dates) if day in setting]
    sums = np.array(progress.references.sums)[:, None] + prices[places].sum(axis=0)
    return np.asarray(sums / (progress.references.count + len(places)))
