"""The feature that DEVELOPERS.md adds as an example works as it stands there: aged, missed, and priced."""

import re
from datetime import date
from pathlib import Path

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.appraisal import AppraisalSettings, appraise
from pricer.engines.contract_value import ContractSettings
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.market.standing import standing
from tests.unit.markets import TODAY, small_market

GUIDE = Path(__file__).parents[2] / "DEVELOPERS.md"
PAST, SOON, END = date(2026, 10, 1), date(2027, 3, 1), date(2027, 9, 1)


@pytest.fixture(scope="module")
def highest():
    (code,) = re.findall(r"```python\n(.*?class Highest.*?)```", GUIDE.read_text(encoding="utf-8"), re.DOTALL)
    scope: dict[str, object] = {}
    exec(compile(code, str(GUIDE), "exec", dont_inherit=True), scope)
    return scope["Highest"]


def lookback(highest) -> Trade:
    statistic = highest((PAST, SOON, END), Aggregate.weighted_sum((1.0,)))
    levels = Levels(("ARVENNE",), (100.0,))
    contract = Contract(levels, statistic, Profile(ProfileKind.CALL, 1.0), Observation(END, END))
    return Trade("LOOKBACK", contract, 1.0, "EUR")


def test_a_fixing_that_it_lacks_is_asked_for(highest):
    found = standing(lookback(highest), small_market())
    assert [issue.code for issue in found.issues] == ["missing-fixing"]


def test_it_is_priced_with_its_past(highest):
    market = small_market(fixings=Fixings.from_rows([Fixing("ARVENNE", PAST, 104.0)]))
    walk = WalkSettings(initial_points=512, maximum_cells=1.0)
    settings = AppraisalSettings(seed=3, contract=ContractSettings(walk=walk))
    found = appraise(lookback(highest), market, settings)
    # By hand: two further dates of one lognormal level, on a grid of normals.
    first, last = market.joint_lognormal(["ARVENNE"], SOON), market.joint_lognormal(["ARVENNE"], END)
    nodes, weights = np.polynomial.hermite_e.hermegauss(200)
    weights = weights / weights.sum()
    v, w = first.covariance[0, 0], last.covariance[0, 0]
    early = first.forwards[0] * np.exp(np.sqrt(v) * nodes[:, None] - v / 2)
    late = last.forwards[0] * np.exp(np.sqrt(v) * nodes[:, None] + np.sqrt(w - v) * nodes[None, :] - w / 2)
    payoff = np.maximum(np.maximum(early, late), 104.0) / 100.0 - 1.0
    by_hand = market.discount_factor("EUR", "", END) * float(weights @ payoff @ weights)
    assert found.as_of.valuation_date == TODAY
    value = found.leading.headline
    assert value.standard_error < 0.001
    assert abs(value.value - by_hand) < 4.0 * value.standard_error + 1e-4  # four errors; the grid's kinks
    assert np.all(np.isnan(found.leading.ratios.deltas))
