"""The writer of an option, who may not pay."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date


@dataclass(frozen=True, slots=True)
class StructuralDefault:
    """Default at expiry if the value of the writer's assets is below ``liabilities`` then.

    ``assets`` is the id under which the market quotes the value of the assets, as an underlying;
    ``deadweight_cost`` is the share of the assets that the default itself destroys (alpha of Klein 1996).
    Liabilities of 0 say that the position itself is all that the writer owes: the assets are paid where they are
    less than that (Johnson & Stulz 1987).
    """

    assets: str
    liabilities: float
    deadweight_cost: float = 0.0

    def __post_init__(self) -> None:
        if self.liabilities < 0.0 or not 0.0 <= self.deadweight_cost < 1.0:
            raise ValueError(
                f"liabilities must be 0 or more and the deadweight cost from 0 to below 1; "
                f"got {self.liabilities} and {self.deadweight_cost}"
            )
        if self.liabilities == 0.0 and self.deadweight_cost:
            raise ValueError("a writer who owes nothing else is paid out without a deadweight cost")


@dataclass(frozen=True, slots=True)
class Writer:
    """``name`` is a name of the market's credit table; its hazard rates apply unless ``structural`` is given.

    ``recovery`` overrides the market's; ``defaulted_on`` is the desk's record of a default.
    """

    name: str
    recovery: float | None = None
    structural: StructuralDefault | None = None
    defaulted_on: date | None = None

    def __post_init__(self) -> None:
        if self.recovery is not None and not 0.0 <= self.recovery <= 1.0:
            raise ValueError(f"a recovery lies from 0 to 1; got {self.recovery}")
