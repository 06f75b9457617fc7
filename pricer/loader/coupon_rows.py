"""The table coupons: the trigger of conditional coupons, and their memory."""

from __future__ import annotations

from typing import Annotated

from pricer.loader.columns import Column
from pricer.loader.names import YesNo
from pricer.loader.trigger_columns import TriggerRow


class CouponRow(TriggerRow):
    """The trigger of a trade's coupons; their dates, levels and amounts are in the table schedules."""

    memory: Annotated[
        bool,
        Column(YesNo(), "whether a coupon that is paid brings those missed before it", "yes", "", False, "for no"),
    ]
