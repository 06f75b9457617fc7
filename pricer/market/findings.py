"""Issues of a market or of a trade on it: worded, and put where a person can find them."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from difflib import get_close_matches

from pricer.core.issues import Issue, Severity
from pricer.core.source import Place

#: Answers where a fact (a column's name, or e.g. "underlying:ID") was read, or None.
Locate = Callable[[str], Place | None]


def nowhere(_: str) -> Place | None:
    """No place is known for anything."""
    return None


def error(place: Place | None, code: str, found: str, expected: str, mend: str) -> Issue:
    """An issue that keeps a trade from being priced."""
    return _at(place, Issue(code, found, expected, mend))


def warning(place: Place | None, code: str, found: str, expected: str, mend: str) -> Issue:
    """An issue that a person should look at."""
    return _at(place, Issue(code, found, expected, mend, Severity.WARNING))


def words(names: Iterable[str], joint: str = "and") -> str:
    """``A``, ``A and B``, ``A, B and C``."""
    *first, last = names
    return f"{', '.join(first)} {joint} {last}" if first else last


def percent(value: float, digits: int = 0) -> str:
    """``2.50 %`` for 0.025 with 2 digits."""
    return f"{100.0 * value:.{digits}f} %"


def did_you_mean(name: str, known: Iterable[str]) -> str:
    """``Did you mean "X"? `` (with the space) if a known name is close, whatever its case; else nothing."""
    by_folded = {candidate.casefold(): candidate for candidate in known}
    close = get_close_matches(name.casefold(), list(by_folded), n=1, cutoff=0.6)
    return f'Did you mean "{by_folded[close[0]]}"? ' if close else ""


def markets_reason(issues: tuple[Issue, ...]) -> str:
    """Why the market refused something, short enough to stand in a trade's issue; nothing if it did not."""
    if not issues:
        return ""
    first, more = issues[0], len(issues) - 1
    place = f"{first.place()}: " if first.place() else ""
    rest = f" (and {more} more)" if more else ""
    return f"Mend the market first: {place}found {first.found}; expected {first.expected}{rest}."


def _at(place: Place | None, issue: Issue) -> Issue:
    if place is None:
        return issue
    return Issue(
        issue.code,
        issue.found,
        issue.expected,
        issue.mend,
        issue.severity,
        file=place.file,
        sheet=place.sheet,
        row=place.row,
        column=place.column,
        cell=place.cell or None,
    )
