"""The sample's broken twins: a book and a market with the mistakes that people make.

The market's, in the order of its tables:

- ``dividends``: FENTRICK's in pence, so that they exceed its spot in pounds;
- ``repo``: a rate of PELLOMAR in per cent;
- ``volatilities``: TESKIR with a butterfly and a calendar contradiction beyond what a surface may
  have, SORBEQ with a mild one, VADRONE with expiries of last summer, a volatility of HALQUIN in per cent,
  none of WEXMOOR;
- ``correlations`` that contradict each other a little (ORLUMA, TESKIR, VADRONE);
- ``curves``: none for euros under dollar collateral; ``curve_points``: points of last autumn on the
  sterling curve;
- ``fx``: a sterling rate that does not fit the two others; ``fx_volatilities``: none of EURGBP;
- ``fixings``: one of KRUNTEL missing, one of DRUVEX in pence, two of ORLUMA on one day;
- ``credit``: spreads of Pennifold Capital that no default intensity satisfies, one of Thrayle Insurance in basis
  points;
- ``agreements``: thresholds where Thrayle Insurance posts nothing.
"""

from __future__ import annotations

from collections.abc import Callable
from datetime import date

from saltmarsh.facts import Row, Tables
from saltmarsh.volatilities import quoted_volatility

#: European trades in the order of the book: what is wrong in the row of the table trades.
_IN_EUROPEANS: list[Row] = [
    {"strike": "eighty-six"},
    {"expiry_date": date(2026, 11, 13)},
    {"currency": "EUX"},
    {"direction": "buy it"},
    {"trade_id": "SMD-0006"},
    {"quantity": -5_000},
    {"expiry_date": "03/04/2027"},
    {"notional": None},
    {"aggregate": "wieghted sum"},
    {"collateral": "JPY"},
    {"counterparty": '=HYPERLINK("a")', "strike": "#N/A"},
]
#: Trades on a path: the table, what its row holds, what is wrong in it. An empty row is left out.
_ON_A_PATH: dict[str, tuple[str, Row, Row]] = {
    "SMD-0086": ("trades", {}, {"statistic": "averge"}),
    "SMD-0088": ("schedules", {"date": date(2026, 4, 1)}, {"date": date(2026, 4, 3)}),  # Good Friday: no fixing
    "SMD-0098": ("barriers", {}, {"level": 70}),
    "SMD-0099": ("barriers", {}, {"recorded_hit_date": date(2026, 8, 10), "clear_until": None}),
    "SMD-0103": ("constituents", {"underlying": "VADRONE"}, {"barrier_level": None}),
    "SMD-0104": ("barriers", {}, {"kind": "knock-down"}),
    "SMD-0107": ("schedule_rules", {}, {}),  # a barrier on dates that nobody gives
    "SMD-0109": ("trades", {}, {"local_cap": 3}),
    "SMD-0110": ("schedule_rules", {}, {"frequency": "monthly"}),
    "SMD-0114": ("schedule_rules", {"purpose": "call"}, {"level": 95}),
    "SMD-0116": ("calls", {}, {"feature": 2}),
    "SMD-0118": ("schedule_rules", {"purpose": "coupon"}, {"amount": 2.4}),
    "SMD-0119": ("coupons", {}, {"memory": "maybe"}),
    "SMD-0120": ("coupons", {}, {"feature": 2}),
    "SMD-0121": ("schedules", {"date": date(2029, 3, 1)}, {"date": date(2029, 12, 3)}),
    "SMD-0128": ("trades", {}, {"capital": 100}),
    "SMD-0132": ("trades", {}, {"call_strike": None}),
    "SMD-0137": ("schedule_rules", {}, {}),
    "SMD-0140": ("exercises", {}, {"by": "buyer"}),
    "SMD-0145": ("exercises", {}, {"exercised_date": date(2026, 11, 25)}),
    "SMD-0147": ("writers", {}, {"writer": "Pennyfold Capital"}),
    "SMD-0148": ("writers", {}, {"liabilities": None}),
    "SMD-0151": ("schedule_rules", {}, {}),
    "SMD-0153": ("constituents", {"underlying": "KRUNTEL"}, {"variance_weight": "0,4x"}),
}
#: Trades on a path that nothing is wrong with.
_GOOD = ("SMD-0089", "SMD-0100", "SMD-0101", "SMD-0125", "SMD-0126", "SMD-0127", "SMD-0129", "SMD-0156")


def broken_book(book: Tables) -> Tables:
    """Some good trades and one of each common mistake, to show what refusals look like."""
    first = [row["trade_id"] for row in book["trades"][:20]]
    tables = {
        name: [dict(row) for row in rows if row["trade_id"] in {*first, *_ON_A_PATH, *_GOOD}]
        for name, rows in book.items()
    }
    for trade_id, (table, where, mistake) in _ON_A_PATH.items():
        _mistake(tables[table], {"trade_id": trade_id, **where}, mistake)
    _mistake(tables["constituents"], {"trade_id": "SMD-0014", "underlying": "TESKIR"}, {"weight": None})
    _mistake(tables["constituents"], {"trade_id": "SMD-0015", "underlying": "HALQUIN"}, {"underlying": "HALQUEN"})
    for row, mistake in zip(tables["trades"], _IN_EUROPEANS, strict=False):
        row.update(mistake)
    return tables


def _mistake(rows: list[Row], where: Row, mistake: Row) -> None:
    """Put the mistake into the row that holds ``where``; take that row out if there is none to put in."""
    (found,) = [row for row in rows if all(row.get(name) == value for name, value in where.items())]
    if mistake:
        found.update(mistake)
    else:
        rows.remove(found)


def broken_market(market: Tables) -> Tables:
    """The market with mistakes in nearly every table; what has none is left as it is."""
    tables = {name: [dict(row) for row in rows] for name, rows in market.items()}
    _slip(tables["dividends"], "cash_amount", lambda x: 100.0 * x, underlying="FENTRICK")
    _slip(tables["repo"], "long_rate_decimal", lambda x: 100.0 * x, underlying="PELLOMAR", date=date(2028, 11, 30))
    tables["volatilities"] = _broken_volatilities(tables["volatilities"])
    for a, b, value in (("ORLUMA", "TESKIR", 0.93), ("TESKIR", "VADRONE", 0.90), ("ORLUMA", "VADRONE", 0.63)):
        _slip(tables["correlations"], b, lambda _, value=value: value, underlying=a)
        _slip(tables["correlations"], a, lambda _, value=value: value, underlying=b)
    for name in ("curves", "curve_points"):
        tables[name] = [row for row in tables[name] if row["curve"] != "EUR-USD-CASH"]
    stale = [
        {"curve": "GBP-STANDARD", "date": day, "zero_rate_decimal": rate}
        for day, rate in ((date(2026, 9, 30), 0.0381), (date(2026, 10, 30), 0.0378))
    ]
    first = next(i for i, row in enumerate(tables["curve_points"]) if row["curve"] == "GBP-STANDARD")
    tables["curve_points"][first:first] = stale
    _slip(tables["fx"], "spot", lambda _: 1.3307, pair="GBPUSD")
    tables["fx_volatilities"] = [row for row in tables["fx_volatilities"] if row["pair"] != "EURGBP"]
    tables["fixings"] = _broken_fixings(tables["fixings"])
    _slip(tables["credit"], "cds_spread_decimal", lambda _: 0.0900, name="Pennifold Capital", tenor="1Y")
    _slip(tables["credit"], "cds_spread_decimal", lambda _: 0.0120, name="Pennifold Capital", tenor="2Y")
    _slip(tables["credit"], "cds_spread_decimal", lambda x: round(1e4 * x, 2), name="Thrayle Insurance", tenor="5Y")
    _slip(tables["agreements"], "collateral", lambda _: "none", netting_set="THR-1")
    return tables


def _broken_fixings(rows: list[Row]) -> list[Row]:
    kept = [row for row in rows if (row["underlying"], row["date"]) != ("KRUNTEL", date(2026, 11, 25))]
    _slip(kept, "level", lambda x: round(100.0 * x, 2), underlying="DRUVEX", date=date(2026, 6, 17))
    first = next(i for i, row in enumerate(kept) if row["underlying"] == "ORLUMA" and row["date"] == date(2026, 11, 17))
    return [*kept[: first + 1], kept[first] | {"level": 84.91}, *kept[first + 1 :]]


def _broken_volatilities(rows: list[Row]) -> list[Row]:
    kept = [row for row in rows if row["underlying"] != "WEXMOOR"]
    january, winter = date(2027, 1, 15), date(2027, 12, 17)
    teskir = [row for row in kept if row["underlying"] == "TESKIR" and row["expiry_date"] == winter]
    # One strike three points too high, and the expiry after it nine points too low.
    teskir[4]["volatility_decimal"] = round(teskir[4]["volatility_decimal"] + 0.03, 4)
    _slip(kept, "volatility_decimal", lambda x: round(x - 0.09, 4), underlying="TESKIR", expiry_date=date(2028, 12, 15))
    # Strikes 1 % apart, the middle one 0.3 points too high.
    last = max(i for i, row in enumerate(kept) if row["underlying"] == "SORBEQ" and row["expiry_date"] == january)
    kept[last + 1 : last + 1] = [
        {
            "underlying": "SORBEQ",
            "expiry_date": january,
            "strike_of_forward_decimal": ratio,
            "volatility_decimal": round(quoted_volatility("SORBEQ", january, ratio) + error, 4),
        }
        for ratio, error in ((0.99, 0.0), (1.0, 0.0030), (1.01, 0.0))
    ]
    halquin = [row for row in kept if row["underlying"] == "HALQUIN" and row["expiry_date"] == winter]
    halquin[3]["volatility_decimal"] = round(100.0 * halquin[3]["volatility_decimal"], 2)
    first = next(i for i, row in enumerate(kept) if row["underlying"] == "VADRONE")
    stale = [
        {"underlying": "VADRONE", "expiry_date": day, "strike": strike, "volatility_decimal": volatility}
        for day, strike, volatility in (
            (date(2026, 9, 18), 34.0, 0.2110),
            (date(2026, 9, 18), 36.0, 0.1930),
            (date(2026, 9, 18), 38.0, 0.1790),
            (date(2026, 11, 20), 37.0, 0.1850),
        )
    ]
    return [*kept[:first], *stale, *kept[first:]]


def _slip(rows: list[Row], column: str, change: Callable[[float], object], **where: object) -> None:
    """Change ``column`` of the rows whose other columns hold ``where``."""
    found = [row for row in rows if all(row.get(name) == value for name, value in where.items()) and column in row]
    if not found:
        raise ValueError(f"no rows with {column} where {where}")
    for row in found:
        row[column] = change(row[column])
