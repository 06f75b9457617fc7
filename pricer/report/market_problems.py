"""What was wrong with the snapshot, counted by kind and table; the table of problems has every one of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from pricer.core.issues import Issue, Severity
from pricer.core.source import SourceFile

_GRAVEST_FIRST = (Severity.FATAL, Severity.ERROR, Severity.WARNING)
#: The sheets of a book; what is found on another sheet was found in the market.
BOOK_SHEETS = frozenset(
    {
        "trades",
        "constituents",
        "schedules",
        "schedule_rules",
        "barriers",
        "calls",
        "coupons",
        "exercises",
        "writers",
    }
)


@dataclass(frozen=True, slots=True)
class MarketProblem:
    """All problems of one kind, table and severity.

    ``table`` is blank where no table is at fault. ``number`` counts places; the rest describes the first of them.
    """

    severity: Severity
    kind: str
    table: str
    number: int
    place: str
    found: str
    expected: str
    mend: str
    code: str


def market_problems(issues: Sequence[Issue], sources: Sequence[SourceFile]) -> list[MarketProblem]:
    """Problems of the market among ``issues``, the gravest kinds first and the most frequent first among those.

    A kind is told table by table: 50 levels of the price history that are no numbers do not hide one such rate.

    ``sources`` are the files read, the book's before the market's.
    """
    kinds: dict[tuple[Severity, str, str], list[Issue]] = {}
    # One that is charged to several trades stands at one place.
    for issue in dict.fromkeys(replace(issue, trade_id=None) for issue in issues if _of_market(issue, sources)):
        kinds.setdefault((issue.severity, issue.code, issue.sheet or ""), []).append(issue)
    problems = [
        MarketProblem(
            severity=severity,
            kind=code.replace("-", " "),
            table=table,
            number=len(found),
            place=found[0].place(),
            found=found[0].found,
            expected=found[0].expected,
            mend=found[0].mend,
            code=code,
        )
        for (severity, code, table), found in kinds.items()
    ]
    return sorted(problems, key=lambda p: (_GRAVEST_FIRST.index(p.severity), -p.number))


def _of_market(issue: Issue, sources: Sequence[SourceFile]) -> bool:
    if issue.sheet in BOOK_SHEETS:
        return False
    if issue.file is None:
        return issue.trade_id is None and issue.sheet is None
    names = [source.name for source in sources]
    # One name for both inputs tells nothing; then the sheet alone decides.
    return issue.file not in names or names.count(issue.file) > 1 or not _same_input(issue.file, names[0])


def _same_input(name: str, other: str) -> bool:
    """Whether two files belong to one input: one file, or one folder of CSV files."""
    folder, _, _ = name.rpartition("/")
    other_folder, _, _ = other.rpartition("/")
    return name == other or (bool(folder) and folder == other_folder)
