"""Columns of an option or note on a path: which statistic of it is paid on."""

from __future__ import annotations

from enum import StrEnum
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.average import AverageOf
from pricer.loader.columns import Column, TableRow
from pricer.loader.faults import Fault, number_in_words, unwanted
from pricer.loader.names import CalendarName, Choice, YesNo
from pricer.loader.numbers import Number, as_percentage_points


class StatisticKind(StrEnum):
    """What the payoff is paid on."""

    EXPIRY_LEVEL = "expiry level"
    AVERAGE = "average"
    CLIQUET = "cliquet"
    LOCKED_IN = "locked in"
    VARIANCE = "variance"
    VOLATILITY = "volatility"
    CORRELATION = "correlation"


VARIANCES = (StatisticKind.VARIANCE, StatisticKind.VOLATILITY)
#: Statistics whose dates bound periods, so that a rule's start is one of them.
OF_PERIODS = frozenset({StatisticKind.CLIQUET, *VARIANCES, StatisticKind.CORRELATION})

#: The aggregates that a statistic can be of, where it is particular.
AGGREGATES_OF = {
    StatisticKind.LOCKED_IN: (AggregateKind.KTH_BEST, AggregateKind.BEST_OF, AggregateKind.WORST_OF),
    StatisticKind.CORRELATION: (AggregateKind.WEIGHTED_SUM,),
}

#: A period's performance beyond this is percentage points typed where a decimal belongs.
HIGHEST_LOCAL_LIMIT = 1.0

_OWNERS = {
    "average_of": ((StatisticKind.AVERAGE,), "averages"),
    "local_floor": ((StatisticKind.CLIQUET,), "cliquets"),
    "local_cap": ((StatisticKind.CLIQUET,), "cliquets"),
    "aggregate_weight": (VARIANCES, "variances and volatilities"),
    "returns_per_year": (VARIANCES, "variances and volatilities"),
    "demeaned": ((StatisticKind.CORRELATION,), "correlations"),
}


class StatisticColumns(TableRow):
    """The statistic and its own terms; its dates are in the table schedules."""

    observation_calendar: Annotated[
        str | None,
        Column(
            CalendarName(),
            "the calendar on whose business days the underlyings are observed, for schedules given by a rule",
            "TARGET+NYSE",
            "",
            None,
            "for the settlement calendar",
        ),
    ]
    statistic: Annotated[
        StatisticKind,
        Column(
            Choice.of(StatisticKind),
            "the statistic of the path that is paid on",
            "average",
            "its dates have the purpose observation in the table schedules",
            StatisticKind.EXPIRY_LEVEL,
            "for the level at expiry",
        ),
    ]
    average_of: Annotated[
        AverageOf | None,
        Column(
            Choice.of(AverageOf),
            "what is averaged",
            "underlyings",
            "each underlying's levels, or each day's aggregate",
            None,
            "for the underlyings, and unless it is an average",
        ),
    ]
    local_floor: Annotated[
        float | None,
        Column(
            Number(percent=True),
            "the least performance of a cliquet's period",
            "-0.02",
            "as a decimal (-0.02 = -2 %)",
            None,
            "for none",
        ),
    ]
    local_cap: Annotated[
        float | None,
        Column(
            Number(percent=True),
            "the largest performance of a cliquet's period",
            "0.03",
            "as a decimal (0.03 = 3 %)",
            None,
            "for none",
        ),
    ]
    aggregate_weight: Annotated[
        float | None,
        Column(
            Number(percent=True),
            "the weight of the aggregate's own variance",
            "-1",
            "-1 for a dispersion, whose other weights are in the column variance_weight of the constituents",
            None,
            "for 1, and unless it is a variance or volatility",
        ),
    ]
    returns_per_year: Annotated[
        float | None,
        Column(
            Number(above=0.0),
            "the number of returns by which variance is annualised",
            "252",
            "",
            None,
            "for 252, and unless it is a variance or volatility",
        ),
    ]
    demeaned: Annotated[
        bool | None,
        Column(
            YesNo(),
            "whether the mean returns are subtracted before a correlation is taken",
            "no",
            "",
            None,
            "for yes, and unless it is a correlation",
        ),
    ]

    @field_validator("statistic")
    @classmethod
    def check_statistic(cls, statistic: StatisticKind, info: ValidationInfo) -> StatisticKind:
        aggregate, fitting = info.data.get("aggregate"), AGGREGATES_OF.get(statistic)
        if aggregate is not None and fitting is not None and aggregate not in fitting:
            raise Fault(
                "terms-do-not-fit",
                f"the statistic {statistic} on the aggregate {aggregate}",
                f"the aggregate {' or '.join(fitting)}",
                "Correct the aggregate or the statistic.",
            )
        return statistic

    @field_validator(*_OWNERS)
    @classmethod
    def check_owner(cls, value: object, info: ValidationInfo) -> object:
        statistic = info.data.get("statistic")
        statistics, owner = _OWNERS[info.field_name or ""]
        if value is not None and statistic is not None and statistic not in statistics:
            raise unwanted("yes" if value is True else "no" if value is False else value, owner, "statistic")
        return value

    @field_validator("local_floor", "local_cap")
    @classmethod
    def check_local_limit(cls, limit: float | None, info: ValidationInfo) -> float | None:
        if limit is not None and abs(limit) > HIGHEST_LOCAL_LIMIT:
            expected = f"a decimal performance (0.03 = 3 %) of at most {HIGHEST_LOCAL_LIMIT:g}"
            raise as_percentage_points(limit, expected, HIGHEST_LOCAL_LIMIT)
        floor = info.data.get("local_floor") if info.field_name == "local_cap" else None
        if limit is not None and floor is not None and limit <= floor:
            expected = f"a cap above the floor {number_in_words(floor)}"
            raise Fault("terms-do-not-fit", number_in_words(limit), expected, "Correct the cap or the floor.")
        return limit
