"""The table calls: the trigger of an automatic call."""

from __future__ import annotations

from pricer.loader.trigger_columns import TriggerRow


class CallRow(TriggerRow):
    """The trigger of a trade's automatic calls; their dates, levels and amounts are in the table schedules."""
