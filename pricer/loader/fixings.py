"""Fixings in long form: one row per day and underlying or currency pair."""

from __future__ import annotations

from collections.abc import Collection
from datetime import date

from pricer.contracts.fixings import Fixing, Fixings
from pricer.loader.faults import Fault, Reading, number_in_words
from pricer.loader.findings import Findings
from pricer.loader.names import CurrencyPair
from pricer.loader.table import UNREAD, Row, Table
from pricer.loader.underlying_rows import FixingRow

_Key = tuple[str, date]


def read_fixings(table: Table[FixingRow] | None, known: Collection[str], findings: Findings) -> Fixings:
    """The usable fixings of all names, also of days after the valuation date; without a table there are none.

    A row that cannot be read, or levels that differ for one day, cost that fixing alone: it is missing, and says why.
    Pairs are found however they are written, "EUR/USD" or "eurusd", unless an underlying is called so.
    """
    if table is None:
        return Fixings()
    found: dict[_Key, tuple[Fixing, int]] = {}
    lost: dict[_Key, str] = {}
    for row in table.rows:
        findings.add(row.issues)
        key = _key(row, known)
        if key is None:
            continue
        if row.value is None:
            lost[key] = f"row {row.number} of the fixings table cannot be used"
            continue
        fixing = Fixing(*key, row.value.level, row.value.reason)
        if fixing.level is None and key in found:  # a level beside it explains itself
            continue
        first = found.get(key)
        if first is not None and first[0].level is not None and first[0].level != fixing.level:
            findings.add([table.issue(row.number, "level", _second(fixing, first[0].level, first[1]))])
            lost[key] = f"rows {first[1]} and {row.number} of the fixings table differ"
        elif first is None or first[0].level is None:
            found[key] = fixing, row.number
    kept = [fixing for key, (fixing, _) in found.items() if key not in lost]
    return Fixings.from_rows([*kept, *(Fixing(name, day, None, why) for (name, day), why in lost.items())])


def _key(row: Row[FixingRow], known: Collection[str]) -> _Key | None:
    name, day = row.get("underlying"), row.get("date")
    if name is UNREAD or day is UNREAD:
        return None
    return (name if name in known else _as_pair(name)), day


def _as_pair(name: str) -> str:
    try:
        return CurrencyPair().read(name, Reading())
    except Fault:
        return name


def _second(fixing: Fixing, other: float, row: int) -> Fault:
    assert fixing.level is not None  # blank rows never contradict
    found = (
        f"{number_in_words(fixing.level)} for {fixing.underlying} on {fixing.day}, but {number_in_words(other)} in "
        f"row {row}"
    )
    mend = "Both are left out: trades that need it are not priced. Delete the wrong one."
    return Fault("repeated-fixing", found, "one level per day", mend)
