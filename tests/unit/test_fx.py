"""Spot exchange rates, inverted and crossed."""

import pickle

import pytest

from pricer.market.fx import FxRates, MissingRate

RATES = FxRates.from_pairs({"EURUSD": 1.10, "USDJPY": 150.0, "EURGBP": 0.85, "NOKSEK": 0.98})


def test_quotes_inverses_and_crosses():
    assert RATES.rate("EUR", "USD") == 1.10
    assert RATES.rate("USD", "JPY") == 150.0
    assert RATES.rate("USD", "EUR") == 1 / 1.10
    assert RATES.rate("EUR", "JPY") == pytest.approx(165.0)
    assert RATES.rate("JPY", "GBP") == pytest.approx(0.85 / 165.0)
    assert RATES.rate("CHF", "CHF") == 1.0


def test_the_shortest_chain_wins_and_then_the_alphabet():
    square = FxRates.from_pairs({"DDDCCC": 1.0, "CCCAAA": 1.0, "DDDBBB": 1.0, "BBBAAA": 7.0})
    assert square.chain("AAA", "DDD") == ("AAA", "BBB", "DDD")
    assert square.chain("DDD", "AAA") == ("DDD", "BBB", "AAA")
    assert square.rate("DDD", "AAA") == 7.0
    with_direct = FxRates.from_pairs({"DDDCCC": 1.0, "CCCAAA": 1.0, "AAADDD": 2.0})
    assert with_direct.rate("DDD", "AAA") == 0.5


def test_both_directions_pass_the_same_currencies():
    """Two chains of one length, alphabetically first from different ends."""
    rates = FxRates.from_pairs(
        {"AAABBB": 1.0, "BBBYYY": 2.0, "YYYDDD": 1.0, "AAACCC": 1.0, "CCCXXX": 3.0, "XXXDDD": 1.0}
    )
    assert rates.chain("AAA", "DDD") == ("AAA", "BBB", "YYY", "DDD")
    assert rates.chain("DDD", "AAA") == ("DDD", "YYY", "BBB", "AAA")
    assert rates.rate("DDD", "AAA") == 0.5


def test_the_order_of_quotes_changes_nothing():
    pairs = {"DDDCCC": 1.1, "CCCAAA": 1.3, "DDDBBB": 0.7, "BBBAAA": 7.0}
    backwards = FxRates.from_pairs(dict(reversed(pairs.items())))
    assert backwards.rate("AAA", "DDD") == FxRates.from_pairs(pairs).rate("AAA", "DDD")


def test_a_missing_route_is_told_in_the_order_asked():
    for there, back in (("EUR", "SEK"), ("SEK", "EUR"), ("XXX", "EUR")):
        with pytest.raises(MissingRate) as caught:
            RATES.rate(there, back)
        assert str(caught.value) == f"no quoted exchange rates lead from {there} to {back}"
        assert isinstance(caught.value, KeyError)
    assert str(pickle.loads(pickle.dumps(caught.value))) == str(caught.value)


def test_known_currencies():
    assert RATES.currencies == ("EUR", "GBP", "JPY", "NOK", "SEK", "USD")
    assert RATES.knows("SEK") and not RATES.knows("CHF")


@pytest.mark.parametrize(
    ("pairs", "message"),
    [
        ({"EUR": 1.0}, '"EUR" is not a currency pair: write two currency codes together, e.g. EURUSD'),
        ({"eurusd": 1.0}, '"eurusd" is not a currency pair: write two currency codes together, e.g. EURUSD'),
        ({"EUREUR": 1.0}, '"EUREUR" is not a currency pair: write two currency codes together, e.g. EURUSD'),
        ({"EURUSD": 0.0}, "the rate of EURUSD must be above 0; got 0.0"),
        ({"EURUSD": 1.1, "USDEUR": 0.9}, "both EURUSD and USDEUR are quoted: keep one of them"),
    ],
)
def test_bad_quotes_are_refused(pairs, message):
    with pytest.raises(ValueError) as caught:
        FxRates.from_pairs(pairs)
    assert str(caught.value) == message
