"""Columns of everything that has a trigger: what is watched, and on which side of its level it is met."""

from __future__ import annotations

from enum import StrEnum
from typing import Annotated

from pricer.contracts.trigger import Direction
from pricer.loader.columns import Column, TableRow
from pricer.loader.names import Choice, YesNo
from pricer.loader.schedule_rows import feature_number, trade_reference


class WatchedOn(StrEnum):
    """Whose levels are compared."""

    AGGREGATE = "aggregate"
    ANY = "any underlying"
    EVERY = "every underlying"


def watched_on() -> Column:
    """What is watched."""
    meaning = "what is compared with the level"
    return Column(Choice.of(WatchedOn), meaning, "any underlying", "", WatchedOn.AGGREGATE, "for the aggregate")


def at_level_counts() -> Column:
    """Whether equality counts."""
    meaning = "whether a level exactly met counts"
    return Column(YesNo(), meaning, "no", "no: above or below only", True, "for yes")


class FeatureRow(TableRow):
    """A feature of a trade."""

    trade_id: Annotated[str, trade_reference()]
    feature: Annotated[int, feature_number()]


class TriggerRow(FeatureRow):
    """A feature with a trigger, which looks up unless it says otherwise."""

    direction: Annotated[
        Direction,
        Column(
            Choice.of(Direction), "the side on which the level is met", "up", "up: at or above it", Direction.UP,
            "for up",
        ),
    ]  # fmt: skip
    watched_on: Annotated[WatchedOn, watched_on()]
    at_level_counts: Annotated[bool, at_level_counts()]
