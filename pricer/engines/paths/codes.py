"""How aggregates and conditions of payments are written in the tables of either leg kernel."""

from __future__ import annotations

from pricer.contracts.aggregate import AggregateKind
from pricer.engines.paths.leg import When
from pricer.simulation.kernels import path_tables as k
from pricer.simulation.kernels import readings as r

KINDS = {
    AggregateKind.WEIGHTED_SUM: r.SUM,
    AggregateKind.BEST_OF: r.BEST,
    AggregateKind.WORST_OF: r.WORST,
    AggregateKind.KTH_BEST: r.RANKED,
    AggregateKind.RANK_WEIGHTED: r.RANKED,
    AggregateKind.GEOMETRIC: r.GEOMETRIC,
}
WHENS = {
    When.ALIVE: k.ALIVE_BEFORE,
    When.SURVIVING: k.SURVIVING,
    When.STOPPED_ABOVE: k.STOPPED_ABOVE,
    When.STOPPED_BELOW: k.STOPPED_BELOW,
}
