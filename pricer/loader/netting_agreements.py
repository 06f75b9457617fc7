"""Agreements by netting set, from their table."""

from __future__ import annotations

from pricer.loader.credit_rows import AgreementRow
from pricer.loader.faults import Fault
from pricer.loader.findings import Findings, by_own_id
from pricer.loader.table import Table
from pricer.market.agreements import Agreement

#: The keys of ``Market.rejected`` for agreements begin so: "agreements:NETTING_SET".
AGREEMENTS = "agreements"


def read_agreements(table: Table[AgreementRow] | None, findings: Findings) -> dict[str, Agreement]:
    """The usable agreements; a faulty row costs its netting set's."""
    if table is None:
        return {}
    own = findings.under(AGREEMENTS)
    out: dict[str, Agreement] = {}
    for name, row in by_own_id(table, "netting_set", own).items():
        if row.value is None or own.is_rejected(name):
            continue
        terms = row.value
        try:
            out[name] = Agreement(
                netting_set=name,
                counterparty=terms.counterparty,
                currency=terms.currency,
                collateral=terms.collateral,
                counterparty_threshold=terms.counterparty_threshold,
                desk_threshold=terms.desk_threshold,
                minimum_transfer_amount=terms.minimum_transfer_amount,
                independent_amount=terms.independent_amount,
                collateral_spread=terms.collateral_spread_decimal,
                margin_period_days=terms.margin_period_days,
                close_out=terms.close_out,
            )
        except ValueError as error:
            fault = Fault("unusable-agreement", str(error), "terms that fit together", "Correct the agreement.")
            own.reject(name, [table.issue(row.number, "netting_set", fault)])
    return out
