"""The folder of one report, written whole or not at all."""

from __future__ import annotations

import os
import shutil
import uuid
from collections import Counter
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import TYPE_CHECKING

from pricer.report.frames import tables
from pricer.report.run_facts import json_text, run_facts
from pricer.report.text import csv_text, slug
from pricer.report.workbook import write_workbook
from pricer.run.outcome import Outcome

if TYPE_CHECKING:
    import pandas

WORKBOOK = "report.xlsx"
# The table of times is in run.json: plain tables must be the same on every run of the same input and seed.
_AS_CSV = (
    *("valuations", "deltas", "underlying_deltas", "summaries", "cross_check"),
    *("problems", "not_priced", "refusal_causes"),
    *("market_problems", "surfaces", "violations", "calibration", "curves", "forwards"),
    *("credit", "funding", "agreements"),
    *("events", "life", "contracts", "contract_dates"),
)


def write_report(outcome: Outcome, folder: Path) -> Path:
    """Write the report into the new folder ``folder`` and return it.

    It holds ``report.xlsx``, one CSV file a table and ``run.json``. Everything is written beside
    ``folder`` first and appears under its name in one step; a failure leaves nothing behind.

    Raises ``FileExistsError`` if ``folder`` exists, ``OSError`` if it cannot be written.
    """
    folder = Path(folder).absolute()
    _refuse_existing(folder)
    frames = tables(outcome)
    severities = Counter(frames["problems"]["severity"].tolist())
    with _appearing_at(folder) as draft:
        for name in _AS_CSV:
            _write_csv(frames[name], draft / f"{name}.csv")
        (draft / "run.json").write_text(json_text(run_facts(outcome, severities)), encoding="utf-8", newline="\n")
        write_workbook(outcome, frames, draft / WORKBOOK)
    return folder


def default_folder(outcome: Outcome, parent: Path) -> Path:
    """A folder in ``parent`` that does not exist yet: ``2026-05-29-may-book``, or ``2026-05-29-may-book-2`` ..."""
    name = f"{outcome.facts.valuation_date.isoformat()}-{slug(outcome.facts.book_name)}"
    folder, n = parent / name, 1
    while os.path.lexists(folder):
        n += 1
        folder = parent / f"{name}-{n}"
    return folder


def _write_csv(frame: pandas.DataFrame, target: Path) -> None:
    """Floats at full precision (the shortest text that reads back to the same number), dates as ISO, UTF-8."""
    frame = frame.copy()
    for name in frame.columns:
        if frame[name].dtype == object:
            frame[name] = [csv_text(text) for text in frame[name]]
    frame.to_csv(target, index=False, date_format="%Y-%m-%d", lineterminator="\n", encoding="utf-8")


def _refuse_existing(folder: Path) -> None:
    if os.path.lexists(folder):
        raise FileExistsError(
            f"{folder} exists, and a report is never overwritten. Name a folder that does not exist yet, or move the "
            "old one away."
        )


@contextmanager
def _appearing_at(folder: Path) -> Iterator[Path]:
    """A draft beside ``folder`` that takes its name if all goes well, and is gone if it does not."""
    made = _make_parents(folder.parent)
    draft = folder.parent / f".draft-{uuid.uuid4().hex}"
    try:
        draft.mkdir()
        yield draft
        for file in draft.iterdir():
            _sync(file)
        _sync(draft)
        _refuse_existing(folder)  # it may have appeared in the meantime
        draft.rename(folder)
    except BaseException:
        shutil.rmtree(draft, ignore_errors=True)
        with suppress(OSError):  # someone else may have put something there
            for parent in reversed(made):
                parent.rmdir()
        raise
    _sync(folder.parent)


def _make_parents(parent: Path) -> list[Path]:
    """Make ``parent``; returns the folders that were made, outermost first."""
    missing = [path for path in (parent, *parent.parents) if not path.exists()]
    parent.mkdir(parents=True, exist_ok=True)
    return missing[::-1]


def _sync(path: Path) -> None:
    """Have the system write ``path`` to its disk; folders cannot be synced on every system."""
    if path.is_dir() and os.name != "posix":
        return
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
