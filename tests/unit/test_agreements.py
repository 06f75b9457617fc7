"""Terms of collateral agreements, and those that contradict each other."""

import math

import pytest

from pricer.market.agreements import Agreement, CloseOut, Collateral


def agreement(**terms):
    return Agreement("NS-1", "NORDHAVN", "EUR", **terms)


def refused(**terms):
    with pytest.raises(ValueError) as caught:
        agreement(**terms)
    return str(caught.value)


def test_without_terms_there_is_no_collateral():
    plain = agreement()
    assert plain.collateral is Collateral.NONE
    assert plain.close_out is CloseOut.RISK_FREE_MARK
    assert not plain.collateral.desk_posts and not plain.collateral.counterparty_posts


def test_who_posts():
    assert [(kind.counterparty_posts, kind.desk_posts) for kind in Collateral] == [
        (False, False), (True, True), (True, False), (False, True),
    ]  # fmt: skip


def test_a_full_agreement():
    terms = agreement(
        collateral=Collateral.TWO_WAY, counterparty_threshold=1e6, desk_threshold=2e6, minimum_transfer_amount=1e5,
        independent_amount=-5e5, collateral_spread=-0.001, margin_period_days=10, close_out=CloseOut.REPLACEMENT_VALUE,
    )  # fmt: skip
    assert terms.desk_threshold == 2e6


def test_terms_without_effect_are_refused():
    assert refused(collateral=Collateral.ONE_WAY_TO_DESK, desk_threshold=1e6) == (
        'netting set NS-1: a desk threshold of 1e+06 has no effect with collateral "one-way to desk": clear it or '
        "correct the kind of collateral"
    )
    assert "a counterparty threshold" in refused(
        collateral=Collateral.ONE_WAY_TO_COUNTERPARTY, counterparty_threshold=1.0
    )
    assert "a minimum transfer amount" in refused(minimum_transfer_amount=1.0)
    assert "a margin period of 10 business days has no effect" in refused(margin_period_days=10)


def test_impossible_amounts_are_refused():
    two_way = {"collateral": Collateral.TWO_WAY}
    assert refused(**two_way, desk_threshold=-1.0) == (
        "netting set NS-1: the desk threshold must be a number from 0 up; got -1.0"
    )
    assert "the minimum transfer amount must be a number from 0 up; got inf" in refused(
        **two_way, minimum_transfer_amount=math.inf
    )
    assert "the collateral spread must be a finite number" in refused(**two_way, collateral_spread=math.nan)
    assert "the margin period must be 0 business days or more; got -1" in refused(**two_way, margin_period_days=-1)
