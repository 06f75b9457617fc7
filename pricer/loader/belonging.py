"""Whose row is it? Rows that refer to something by its id, and those whose id cannot be followed.

A row whose id is blank or misspelt is missing elsewhere: a basket would lose an underlying
and still look whole. Such a row is therefore charged to what it probably belongs to.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Collection, Container, Iterator, Sequence
from dataclasses import dataclass
from typing import TypeVar

from pricer.core.issues import Issue
from pricer.loader.columns import TableRow
from pricer.loader.faults import Fault
from pricer.loader.table import UNREAD, Row, Table
from pricer.loader.text import fold, looks_misspelt, quoted

R = TypeVar("R", bound=TableRow)


@dataclass(frozen=True, slots=True)
class Belonging:
    """A row's owner, or those who may have lost it.

    ``owner`` is the id the row names if it is known, else None. ``name`` is that id as
    read, "" if it cannot be read. ``suspects`` are known ids, only where there is no owner.
    """

    owner: str | None
    name: str
    suspects: tuple[str, ...] = ()


def belongings(rows: Sequence[Row[R]], column: str, known: Container[str]) -> Iterator[tuple[Row[R], Belonging]]:
    """Each row with what it belongs to by its id in ``column``.

    Suspects are the owners of the nearest rows above and below: both of a row without an
    id; of a row with an unknown one, those with a similar id, or the one that stands on both sides.
    """
    names = ["" if (name := row.get(column)) is UNREAD else str(name) for row in rows]
    above: list[str | None] = []
    last: str | None = None
    for name in names:
        above.append(last)
        last = name if name in known else last
    last = None
    below: list[str | None] = []
    for name in reversed(names):
        below.append(last)
        last = name if name in known else last
    below.reverse()
    for row, name, before, after in zip(rows, names, above, below, strict=True):
        if name in known:
            yield row, Belonging(name, name)
            continue
        near = tuple(dict.fromkeys(n for n in (before, after) if n is not None))
        surrounded = before == after
        yield row, Belonging(None, name, tuple(n for n in near if not name or surrounded or looks_misspelt(name, n)))


def rows_by_trade(
    table: Table[R],
    known: Container[str],
    strays: dict[str, list[Issue]],
    unowned: dict[str, list[Issue]],
    may_lack: Collection[str] = (),
) -> dict[str, list[Row[R]]]:
    """The rows of a table by the trade they name.

    Issues of the others are added to ``strays``, by the trades that may have lost them, or else to
    ``unowned``, by the name of the unknown trade. ``may_lack`` are trades that need no row here: one that lost
    its only row to a slip of the finger would look plainer than it is, so that those with a similar id
    and no row are suspected too, wherever the row stands.
    """
    owned: dict[str, list[Row[R]]] = defaultdict(list)
    lost: list[tuple[Row[R], Belonging]] = []
    for row, belonging in belongings(table.rows, "trade_id", known):
        if belonging.owner is not None:
            owned[belonging.owner].append(row)
        else:
            lost.append((row, belonging))
    similar: dict[str, tuple[str, ...]] = {"": ()}
    for row, belonging in lost:
        name = belonging.name
        if name not in similar:
            similar[name] = tuple(
                t for t in may_lack if t not in owned and (one_slip(name, t) or looks_misspelt(name, t))
            )
        suspects = tuple(dict.fromkeys((*belonging.suspects, *similar[name])))
        issues = list(row.issues)
        if name:
            shown = " or ".join(map(quoted, suspects[:3])) + (" or another" if len(suspects) > 3 else "")
            fault = Fault(
                "unknown-trade",
                quoted(name),
                "the trade_id of a row in the table trades",
                f"Did you mean {shown}? Correct the id." if suspects else "Correct the id, or delete the row.",
            )
            issues.append(table.issue(row.number, "trade_id", fault))
        for suspect in suspects:
            strays[suspect] += issues
        if not suspects:
            unowned[name or f"{table.sheet.name} row {row.number}"] += issues
    return owned


def one_slip(first: str, second: str) -> bool:
    """Whether one letter or digit added, left out, changed, or swapped with its neighbour makes one of the other."""
    a, b = fold(first), fold(second)
    if abs(len(a) - len(b)) > 1:
        return False
    start = _shared(a, b)
    end = _shared(a[start:][::-1], b[start:][::-1])
    x, y = a[start : len(a) - end], b[start : len(b) - end]
    return (len(x) <= 1 and len(y) <= 1) or (len(x) == 2 and x == y[::-1])


def _shared(a: str, b: str) -> int:
    """The number of letters with which both begin."""
    return next((i for i, (x, y) in enumerate(zip(a, b, strict=False)) if x != y), min(len(a), len(b)))
