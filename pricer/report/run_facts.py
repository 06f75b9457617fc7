"""``run.json``: what is needed to repeat the run, to believe it, and to read the plain files."""

from __future__ import annotations

import json
import math
from collections import Counter
from dataclasses import asdict
from typing import Any

from pricer.core.issues import Severity
from pricer.report.explanations import CAUTION
from pricer.report.reference_coverage import Checked, checked_total
from pricer.report.surface_fits import Reach, all_quotes, reach, smiles
from pricer.report.text import CSV_RULE, clean
from pricer.report.totals import book_total
from pricer.report.verdicts import without_sampling
from pricer.run.outcome import Outcome, Verdict

FORMAT = 1  # raised when a key changes its meaning or goes


def run_facts(outcome: Outcome, severities: Counter[str]) -> dict[str, Any]:
    """The facts in a fixed order of keys; ``severities`` counts the rows of the table ``problems``."""
    facts = outcome.facts
    headline = book_total(outcome)
    whole = headline.total
    verdicts = Counter(check.verdict for check in outcome.cross_checks)
    surfaces = smiles(outcome.market.surfaces)
    quotes = all_quotes(outcome.market.surfaces)
    references = checked_total(outcome)
    return {
        "format": FORMAT,
        "book": facts.book_name,
        "valuation_date": facts.valuation_date.isoformat(),
        "reporting_currency": facts.reporting_currency,
        "exit_status": outcome.exit_status,
        "total": {
            "value": whole.value,
            "standard_error": whole.standard_error,
            "lower_99": headline.lower,
            "upper_99": headline.upper,
            "unsampled_error": headline.unsampled_error,
            "unpaid_premium": headline.unpaid_premium,
            "model_difference": whole.model_difference,
            "model_difference_standard_error": whole.model_difference_standard_error,
        },
        "counts": {
            "trades": whole.trades,
            "priced": whole.priced,
            "precision_not_reached": whole.precision_not_reached,
            "disputed": whole.disputed,
            "failing_surface": whole.failing_surface,
            "not_priced": whole.not_priced,
            "without_model_difference": whole.without_model_difference,
            "surfaces": len(surfaces),
            "surfaces_failing": sum(not surface.passes for surface in surfaces),
            "quotes": len(quotes),
            "quotes_beyond_target": sum(reach(quote) is Reach.BEYOND for quote in quotes),
            "leading_values_checked": {kind.value: references.by.get(kind, 0) for kind in Checked},
            "cross_checks": {verdict.value: verdicts[verdict] for verdict in Verdict},
            "cross_checks_without_sampling": sum(map(without_sampling, outcome.cross_checks)),
            "problems": {severity.value: severities[severity.value] for severity in Severity},
        },
        "seed": facts.seed,
        "precision_bp": facts.precision_bp,
        "settings": dict(facts.settings),
        "sources": [asdict(source) for source in facts.sources],
        "versions": dict(facts.versions),
        "workers": facts.workers,
        "started": facts.started.isoformat(),
        "seconds": facts.seconds,
        "timings": dict(facts.timings),
        "trade_seconds": [{"trade_id": v.trade_id, "seconds": v.seconds} for v in outcome.valuations],
        "csv_text_rule": CSV_RULE,
        "caution": CAUTION,
    }


def json_text(value: Any) -> str:
    """``value`` as JSON. A number that JSON cannot hold becomes null: it is not known."""
    return json.dumps(_plain(value), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _plain(value: Any) -> Any:
    if isinstance(value, dict):
        return {clean(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list):
        return [_plain(item) for item in value]
    if isinstance(value, str):
        return clean(value)
    return None if isinstance(value, float) and not math.isfinite(value) else value
