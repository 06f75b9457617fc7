"""Credit default swaps, funding and agreements of the sample."""

from __future__ import annotations

from saltmarsh.facts import COUNTERPARTIES, DESK, Row

#: Spreads by name at 1, 2, 3, 5, 7 and 10 years, and recovery.
CREDIT_TENORS = ("1Y", "2Y", "3Y", "5Y", "7Y", "10Y")
CREDIT = {
    DESK: ("EUR", 0.40, (0.0042, 0.0053, 0.0064, 0.0085, 0.0098, 0.0109)),
    "Ostrevane Pension Trust": ("EUR", 0.40, (0.0018, 0.0023, 0.0029, 0.0041, 0.0050, 0.0058)),
    "Guldmar Bank": ("EUR", 0.40, (0.0036, 0.0047, 0.0058, 0.0079, 0.0091, 0.0102)),
    "Thrayle Insurance": ("GBP", 0.40, (0.0029, 0.0039, 0.0050, 0.0071, 0.0084, 0.0095)),
    "Pennifold Capital": ("USD", 0.35, (0.0155, 0.0182, 0.0205, 0.0238, 0.0251, 0.0260)),
    "Ambervale Fund": ("USD", 0.30, (0.0340, 0.0352, 0.0361, 0.0375, 0.0380, 0.0384)),  # almost flat, and high
}
FUNDING = {"3M": (0.0048, 0.0009), "1Y": (0.0060, 0.0011), "2Y": (0.0071, 0.0012), "3Y": (0.0080, 0.0013),
           "5Y": (0.0094, 0.0014), "7Y": (0.0103, 0.0014)}  # fmt: skip


def agreements() -> list[Row]:
    """One for each netting set."""
    ostrevane, guldmar, thrayle, pennifold, ambervale = COUNTERPARTIES.items()
    return [
        _agreement(*ostrevane, "EUR", "one-way to counterparty", desk_threshold=2_000_000,
                   minimum_transfer_amount=100_000, margin_period_days=10),
        _agreement(*guldmar, "EUR", "two-way", minimum_transfer_amount=250_000, margin_period_days=10,
                   collateral_spread_decimal=-0.0005),
        _agreement(*thrayle, "GBP", "two-way", counterparty_threshold=5_000_000, desk_threshold=5_000_000,
                   minimum_transfer_amount=500_000, margin_period_days=10, close_out="replacement value"),
        _agreement(*pennifold, "USD", "none"),
        _agreement(*ambervale, "USD", "one-way to desk", minimum_transfer_amount=100_000, independent_amount=1_500_000,
                   margin_period_days=5),
    ]  # fmt: skip


def _agreement(counterparty: str, netting_set: str, currency: str, collateral: str, **terms: object) -> Row:
    return {
        "netting_set": netting_set,
        "counterparty": counterparty,
        "currency": currency,
        "collateral": collateral,
        **terms,
    }
