"""Local volatility beside the surface it came from: what is missed is told, what is met is not."""

from dataclasses import replace

import numpy as np
import pytest

from pricer.core.issues import Severity
from pricer.core.source import Place
from pricer.market import local_vol_check
from pricer.market.checked_surface import VolatilityQuote
from pricer.market.forward_equation import model_volatilities
from pricer.market.local_vol_check import local_vol_gates, table_misses
from pricer.market.local_vol_surface import LocalVolSurface
from tests.unit.smiles import day
from tests.unit.surface_cases import EVENTFUL, built, heston_quotes

SOUND = built(heston_quotes(days=(91, 365)))


def eventful(levels, skew, curvature):
    return built(
        [
            VolatilityQuote(day(days), level * (1.0 + skew * z + curvature * z * z), relative_strike=float(np.exp(k)))
            for days, level in levels.items()
            for z, k in ((z, z * level * np.sqrt(days / 365)) for z in np.linspace(-2.2, 1.8, 9).tolist())
        ]
    )


#: Quotes that no density has, let through: a curvature of 0.12 at both ends of a jump of volatility.
WILD = replace(eventful({7: 0.08, 10: 0.6, 30: 0.35, 91: 0.25}, -0.25, 0.12), failures=())


def cell(name):
    return Place("market.xlsx", "volatilities", 7, "volatility", "C7") if "2026-12-10" in name else None


@pytest.mark.parametrize("name", EVENTFUL)
@pytest.mark.parametrize(("skew", "curvature"), [(-0.07, 0.045), (0.1, 0.06), (-0.17, 0.09)])
def test_surfaces_that_pass_their_checks_are_given_back_whatever_happens_in_time(name, skew, curvature):
    surface = eventful(EVENTFUL[name], skew, curvature)
    assert surface.passes and list(local_vol_gates(surface)) == []


def test_misses_are_model_less_surface_in_volatility():
    misses = table_misses(WILD)
    assert [miss.quote for miss in misses] == [quote for quote in WILD.quotes if quote.in_the_middle]
    surface = WILD.surface
    k = [
        np.array([q.pure_log_strike for q in WILD.quotes if q.expiry_date == d and q.in_the_middle])
        for d in surface.dates
    ]
    found = model_volatilities(LocalVolSurface.from_implied(surface), k, surface.times)
    wanted = np.concatenate([v - surface.volatility(x, t) for v, x, t in zip(found, k, surface.times, strict=True)])
    # To first order in errors of 0.1 vol points.
    np.testing.assert_allclose([miss.error for miss in misses], wanted, rtol=0.02, atol=1e-7)


def test_the_worst_miss_is_told_with_its_place_and_size():
    (issue,) = local_vol_gates(WILD, cell)
    assert (issue.code, issue.severity, issue.cell) == ("local-volatility-miss", Severity.WARNING, "C7")
    assert str(issue) == (
        'market.xlsx, sheet volatilities, row 7, column "volatility" (cell C7): found the local volatility table of '
        "ARVENNE misses its surface by 0.11 vol points on 2026-12-10 at strike 80.3953 (80.4 % of the forward), and 5 "
        "more of its quotes by less; expected quotes between 10 and 90 delta given back within 0.05 vol points. Values "
        "under local volatility are off by as much; prefer lognormal ones where they depend on these strikes, or "
        "review quotes that are very steep there."
    )


def test_a_single_miss_stands_alone_and_a_failing_surface_says_enough(monkeypatch):
    errors = sorted((abs(miss.error) for miss in table_misses(SOUND)), reverse=True)
    monkeypatch.setattr(local_vol_check, "WORST_TABLE_MISS", 0.5 * (errors[0] + errors[1]))
    (issue,) = local_vol_gates(SOUND)
    assert "more of its quotes" not in issue.found
    assert list(local_vol_gates(replace(SOUND, failures=("a reason",)))) == []


def test_without_quotes_in_the_middle_there_is_nothing_to_miss():
    assert table_misses(replace(SOUND, quotes=())) == ()
