"""Whose row is it? Rows that refer to something by its id, and those whose id cannot be followed.

A row whose id is blank or misspelt is missing elsewhere: a basket would lose an underlying
and still look whole. Such a row is therefore charged to what it probably belongs to.
"""

from __future__ import annotations

from collections.abc import Container, Iterator, Sequence
from dataclasses import dataclass
from typing import TypeVar

from pricer.loader.columns import TableRow
from pricer.loader.table import UNREAD, Row
from pricer.loader.text import looks_misspelt

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
