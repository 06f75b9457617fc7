"""What a run may be told; everything has a default."""

from __future__ import annotations

import os
from dataclasses import dataclass, field

from pricer.contracts.book import Model
from pricer.contracts.overhedge import Overhedge
from pricer.engines.appraisal import AppraisalSettings
from pricer.engines.contract_value import ContractSettings
from pricer.engines.local_vol_monte_carlo import LocalVolSettings
from pricer.engines.monte_carlo import SamplingSettings


def available_cores() -> int:
    """Cores this process may use, at least 1."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


@dataclass(frozen=True, slots=True)
class Settings:
    """Settings of a run.

    ``seed`` : whole number >= 0; the same seed gives the same numbers to the last bit.
    ``precision_bp`` : target standard error of each value, in basis points of notional.
    ``delta_precision_bp`` : the same for each cash delta (delta times spot), of the trade's
    notional or of its gross cash delta, whichever is larger; of the latter, paths under local volatility need
    only come within ``path_delta_precision_bp``, contracts with a path within ``contract_delta_precision_bp``.
    ``workers`` : threads that price trades side by side; no number depends on it.
    ``model`` leads where a trade asks for none; None: local volatility where an underlying has a smile,
    else lognormal. ``compare_models`` : compute both wherever they differ, for the model difference.
    ``accept_failing_surfaces`` : price from volatility surfaces that fail their checks, and mark the trades.
    ``correlation_towards_one``, ``correlation_towards_zero`` : shares from 0 to 1 by which all correlations
    among underlyings are moved; at most one is above 0. ``contract`` : how paths and early exercise are sampled.
    ``overhedge`` : spreads and barrier shifts that the desk would book for safety; their cost is shown, values stay.
    """

    seed: int = 20_000
    precision_bp: float = 1.0
    delta_precision_bp: float = 1.0
    path_delta_precision_bp: float = 10.0
    contract_delta_precision_bp: float = 100.0
    workers: int = field(default_factory=available_cores)
    model: Model | None = None
    compare_models: bool = True
    accept_failing_surfaces: bool = False
    correlation_towards_one: float = 0.0
    correlation_towards_zero: float = 0.0
    sampling: SamplingSettings = field(default_factory=SamplingSettings)
    local_vol: LocalVolSettings = field(default_factory=LocalVolSettings)
    contract: ContractSettings = field(default_factory=ContractSettings)
    overhedge: Overhedge | None = None

    def __post_init__(self) -> None:
        if self.seed < 0:
            raise ValueError(f"the seed must be a whole number from 0; got {self.seed}")
        for precision in (
            self.precision_bp,
            self.delta_precision_bp,
            self.path_delta_precision_bp,
            self.contract_delta_precision_bp,
        ):
            if not precision > 0.0:
                raise ValueError(f"the precision must be above 0 basis points; got {precision}")
        if self.workers < 1:
            raise ValueError(f"the number of workers must be at least 1; got {self.workers}")
        for share in (self.correlation_towards_one, self.correlation_towards_zero):
            if not 0.0 <= share <= 1.0:
                raise ValueError(f"correlations are moved by a share from 0 to 1; got {share}")
        if self.correlation_towards_one > 0.0 and self.correlation_towards_zero > 0.0:
            raise ValueError("correlations are moved either towards one or towards zero")

    @property
    def appraisal(self) -> AppraisalSettings:
        """What the engines need of it."""
        return AppraisalSettings(
            seed=self.seed,
            precision_bp=self.precision_bp,
            delta_precision_bp=self.delta_precision_bp,
            path_delta_precision_bp=self.path_delta_precision_bp,
            contract_delta_precision_bp=self.contract_delta_precision_bp,
            model=self.model,
            compare_models=self.compare_models,
            sampling=self.sampling,
            local_vol=self.local_vol,
            contract=self.contract,
            overhedge=self.overhedge,
        )
