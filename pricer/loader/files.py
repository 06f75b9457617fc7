"""Opening an input: a workbook or a folder of .csv files, and everything that can be wrong with it."""

from __future__ import annotations

import hashlib
from collections import defaultdict
from collections.abc import Iterable, Sequence
from pathlib import Path

from pricer.core.issues import InputError, Issue, Severity
from pricer.core.source import SourceFile
from pricer.loader.csv_folder import read_csv
from pricer.loader.sheets import Sheet, Sheets, UnreadableError
from pricer.loader.text import fold
from pricer.loader.workbook import read_workbook

#: Sheets of our own templates that hold no data.
NOT_DATA = ("read me", "examples")

#: What the template calls everybody's book: the folder it lies in says more.
TEMPLATE_BOOK = "book"


def read_sheets(path: str | Path, wanted: Sequence[str], needed: Sequence[str] = ()) -> Sheets:
    """The ``wanted`` tables of the workbook or folder at ``path``.

    They are named after the file or folder; one that is called ``book`` after the folder it
    lies in. ``needed`` are those without which there is no input, as a message names them.
    Digest and cells come from the same bytes: each file is read once. Raises :class:`InputError`
    when the input cannot be read.
    """
    path = Path(path)
    shown = path.name or str(path)
    if path.is_dir():
        return _read_folder(path, shown, wanted, needed or wanted)
    data = _bytes(path, shown)
    try:
        sheets, others = read_workbook(data, shown, wanted)
    except UnreadableError as error:
        raise InputError([_unreadable(error, shown)]) from error
    return Sheets(_name(path), shown, _by_name(sheets), _unread(others), (SourceFile(shown, _sha256(data)),))


def _read_folder(folder: Path, shown: str, wanted: Sequence[str], needed: Sequence[str]) -> Sheets:
    files = sorted(entry for entry in folder.iterdir() if entry.is_file() and entry.suffix.lower() == ".csv")
    if not files:
        workbooks = sorted(entry.name for entry in folder.glob("*.xlsx"))
        hint = f"Name the workbook in it: {workbooks[0]}." if workbooks else "Name the folder that holds the tables."
        raise InputError(
            [_fatal("no-tables", shown, "a folder without .csv files", f"the files {_csv_names(needed)}", hint)]
        )
    asked = {fold(name) for name in wanted}
    sheets: list[Sheet] = []
    sources: list[SourceFile] = []
    issues: list[Issue] = []
    for entry in files:
        if fold(entry.stem) not in asked:
            continue
        name = f"{shown}/{entry.name}"
        try:
            data = _bytes(entry, name)
            sources.append(SourceFile(name, _sha256(data)))
            sheets.append(read_csv(data, name, entry.stem))
        except UnreadableError as error:
            issues.append(_unreadable(error, name))
        except InputError as error:
            issues.extend(error.issues)
    if issues:
        raise InputError(issues)
    others = [entry.stem for entry in files if fold(entry.stem) not in asked]
    return Sheets(_name(folder), shown, _by_name(sheets), _unread(others), tuple(sources))


def _name(path: Path) -> str:
    whole = path.resolve()
    own = whole.name if path.is_dir() else whole.stem
    return (whole.parent.name if own.casefold() == TEMPLATE_BOOK else "") or own or str(path)


def _bytes(path: Path, shown: str) -> bytes:
    try:
        return path.read_bytes()
    except FileNotFoundError:
        raise InputError(
            [_fatal("missing-file", shown, "no such file or folder", "an .xlsx workbook or a folder of .csv files",
                    f"Check the path: {path}")]
        ) from None  # fmt: skip
    except OSError as error:
        raise InputError(
            [_fatal("unreadable-file", shown, f"a file that cannot be read ({error.strerror})", "a readable file",
                    "Check its permissions, and that no other program holds it.")]
        ) from error  # fmt: skip


def _fatal(code: str, file: str, found: str, expected: str, mend: str) -> Issue:
    return Issue(code, found, expected, mend, Severity.FATAL, file)


def _unreadable(error: UnreadableError, file: str) -> Issue:
    return _fatal(error.code, file, error.found, error.expected, error.mend)


def _by_name(sheets: Iterable[Sheet]) -> dict[str, list[Sheet]]:
    out: dict[str, list[Sheet]] = defaultdict(list)
    for sheet in sheets:
        out[fold(sheet.name)].append(sheet)
    return dict(out)


def _unread(names: Iterable[str]) -> tuple[str, ...]:
    ignored = {fold(name) for name in NOT_DATA}
    return tuple(name for name in names if fold(name) not in ignored)


def _csv_names(wanted: Sequence[str]) -> str:
    names = [f"{name}.csv" for name in wanted]
    return f"{', '.join(names[:-1])} and {names[-1]}" if len(names) > 1 else names[0]


def _sha256(data: bytes) -> str:
    return hashlib.sha256(data).hexdigest()
