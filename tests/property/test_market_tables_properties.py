"""Whatever tables a market has, it loads: an absent optional table costs nothing and says nothing."""

from __future__ import annotations

from tempfile import TemporaryDirectory

from hypothesis import given, settings
from hypothesis import strategies as st

from pricer.loader import load_market, write_tables
from tests.unit.market_tables import full_market

OPTIONAL = ("repo", "fx", "fx_volatilities", "credit", "funding", "agreements", "fixings")


def loaded(tables):
    with TemporaryDirectory() as folder:
        write_tables(tables, f"{folder}/market")
        return load_market(f"{folder}/market")


@settings(max_examples=40, deadline=None)
@given(st.sets(st.sampled_from(OPTIONAL)), st.booleans())
def test_any_subset_of_the_optional_tables_loads_in_silence(absent, emptied):
    tables = full_market()
    for name in absent:
        if emptied:
            tables[name] = []
        else:
            del tables[name]
    market = loaded(tables)
    # The correlations hold the pair EURUSD, which the market knows from either of two tables.
    pair_unknown = {"fx", "fx_volatilities"} <= absent
    # Without rates nobody can tell whether a pair's fixings are plausible.
    rate_unknown = "fx" in absent and "fixings" not in absent
    told = ["unknown-underlying"] * pair_unknown + ["fixings-of-unknown"] * rate_unknown
    assert [issue.code for issue in market.issues] == told
    assert market.rejected == {}
    assert list(market.underlyings) == ["ORLUMA", "TESKIR", "VADRONE", "WEXMOOR"]
    has = {
        "repo": market.repo,
        "fx": market.fx.quotes,
        "fx_volatilities": market.fx.volatilities,
        "credit": market.credit,
        "funding": market.funding is not None,
        "agreements": market.agreements,
        "fixings": market.fixings.levels,
    }
    assert {name for name, held in has.items() if not held} == absent


ODD_CELLS = st.one_of(
    st.none(),
    st.floats(),
    st.integers(-5, 5),
    # A NUL character says that the file is not text at all, and is refused with it (test_loader_csv).
    st.text(st.characters(exclude_characters="\0", codec="utf-8"), max_size=6),
    st.dates(),
    st.sampled_from(["", "n/a", "-", "1e9"]),
)


@settings(max_examples=60, deadline=None)
@given(st.data())
def test_one_odd_cell_anywhere_never_stops_the_reading(data):
    tables = full_market()
    table = data.draw(st.sampled_from([name for name in tables if name not in ("snapshot", "correlations")]))
    rows = [dict(row) for row in tables[table]]
    row = data.draw(st.sampled_from(rows))
    column = data.draw(st.sampled_from(sorted(row)))
    row[column] = data.draw(ODD_CELLS)
    market = loaded({**tables, table: rows})
    # Three underlyings at least are left: one cell spoils one item, or the neighbours that may have lost a row.
    assert len(market.underlyings) >= 2
    for issues in market.rejected.values():
        assert issues
