"""Forwards and volatilities of a market at a glance: those of prices, as they were quoted."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import pytest

from pricer.cli.console import show_market
from pricer.market.dividends import CashDividend, Dividends
from pricer.run.market_outline import outline
from tests.unit.markets import small_market


def test_ends_are_the_quoted_dates_and_volatilities_those_of_the_price():
    """With a cash dividend still to come too: what is quoted at the forward comes back."""
    market = small_market()
    name = next(iter(market.underlyings))
    underlying = market.underlyings[name]
    dates = underlying.volatility.dates
    after_first = date.fromordinal(dates[0].toordinal() + 1)
    paying = replace(underlying, dividends=Dividends(0.0, (), (CashDividend(after_first, 0.05 * underlying.spot),)))
    rows = {row.underlying: row for row in outline(replace(market, underlyings={**market.underlyings, name: paying}))}
    assert list(rows) == sorted(market.underlyings)
    row, market = rows[name], replace(market, underlyings={**market.underlyings, name: paying})
    assert (row.currency, row.spot) == (underlying.currency, underlying.spot)
    for end, day in ((row.first, dates[0]), (row.last, dates[-1])):
        assert (end.day, end.forward) == (day, pytest.approx(market.forward(name, day)))
        assert end.volatility == pytest.approx(underlying.volatility.volatility(day), rel=1e-9)


def test_an_underlying_without_a_volatility_or_a_forward_still_shows_its_spot():
    market = small_market()
    name, other = list(market.underlyings)[:2]
    bare = replace(market.underlyings[name], volatility=None)
    eaten = replace(market.underlyings[other], dividends=Dividends(0.0, (), (CashDividend(date(2027, 1, 5), 1e6),)))
    rows = {row.underlying: row for row in outline(replace(market, underlyings={name: bare, other: eaten}))}
    assert all(row.first is row.last is None for row in rows.values())
    assert rows[name].spot == bare.spot


def test_the_market_is_shown_in_columns_that_a_narrow_terminal_does_not_cut(capsys):
    market = small_market()
    name = next(iter(market.underlyings))
    bare = replace(market.underlyings[name], underlying_id="ZZZ", volatility=None)
    show_market(outline(replace(market, underlyings={**market.underlyings, "ZZZ": bare})))
    title, heading, *lines = capsys.readouterr().out.splitlines()
    assert title == "first and last quoted date, with the forward and the volatility at the forward"
    assert heading.split() == [
        "underlying",
        "spot",
        "quoted",
        "forward",
        "volatility",
        "quoted",
        "forward",
        "volatility",
    ]
    assert len(lines) == len(market.underlyings) + 1
    row = outline(market)[0]
    assert lines[0].split() == [
        row.underlying, f"{row.spot:,.6g}", row.currency,
        str(row.first.day), f"{row.first.forward:,.6g}", f"{100 * row.first.volatility:.2f}", "%",
        str(row.last.day), f"{row.last.forward:,.6g}", f"{100 * row.last.volatility:.2f}", "%",
    ]  # fmt: skip
    assert lines[-1].split() == ["ZZZ", f"{bare.spot:,.6g}", bare.currency, *"------"]
