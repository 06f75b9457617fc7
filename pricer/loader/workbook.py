"""An .xlsx workbook: which sheets it has, and the ones that are wanted, as cells.

Format: ECMA-376, part 1, sections 12 and 18.2.
"""

from __future__ import annotations

import posixpath
import re
import zlib
from collections.abc import Iterable
from dataclasses import dataclass
from io import BytesIO
from xml.etree.ElementTree import Element, TreeBuilder
from xml.parsers import expat
from zipfile import BadZipFile, ZipFile

from pricer.loader.sheets import Sheet, UnreadableError
from pricer.loader.text import fold
from pricer.loader.worksheet import parse_sheet, parse_strings, parse_xml

#: Refused beyond this size when unpacked: no desk's book is that large, a hostile file may be.
LARGEST_PART = 2 * 1024**3

_OLE_FILE = bytes.fromhex("d0cf11e0a1b11ae1")
_IN_QUOTES = re.compile(r'"[^"]*"|\[[^\]]*\]|\\.|_.|\*.')
#: Numbers of the built-in formats that show a date or a time, in any language version.
_BUILT_IN_DATES = frozenset((*range(14, 23), *range(27, 37), *range(45, 48), *range(50, 59)))


def read_workbook(data: bytes, file: str, wanted: Iterable[str]) -> tuple[list[Sheet], list[str]]:
    """The sheets of ``data`` whose name means one of ``wanted``, and the names of all others.

    Raises :class:`UnreadableError` when ``data`` is no workbook, is encrypted or damaged.
    """
    _refuse_other_formats(data)
    folded = {fold(name) for name in wanted}
    try:
        with ZipFile(BytesIO(data)) as archive:
            return _read(archive, file, folded)
    except (
        BadZipFile,
        EOFError,
        zlib.error,
        expat.ExpatError,
        KeyError,
        IndexError,
        ValueError,
        RuntimeError,  # of zipfile: a compression it does not know, or a password on the archive
    ) as error:
        raise UnreadableError(
            "damaged-workbook",
            f"a truncated or damaged workbook ({type(error).__name__}: {error})",
            "a whole .xlsx workbook",
            "Copy or download the file again, or open it in a spreadsheet program and save it anew.",
        ) from error


def _refuse_other_formats(data: bytes) -> None:
    if data.startswith(_OLE_FILE):
        if "EncryptedPackage".encode("utf-16-le") in data:
            raise UnreadableError(
                "encrypted-workbook",
                "a workbook that is encrypted with a password",
                "an .xlsx workbook without a password",
                "Open it with its password and save a copy without one.",
            )
        raise UnreadableError(
            "old-workbook-format",
            "an old binary workbook (.xls) or another Office document",
            "an .xlsx workbook",
            "Open it in a spreadsheet program and save it as .xlsx.",
        )
    if not data.startswith(b"PK"):
        raise UnreadableError(
            "not-a-workbook",
            "an empty file" if not data else "a file that is not a workbook",
            "an .xlsx workbook, or a folder of .csv files",
            "Name the workbook, or for .csv files the folder that holds them.",
        )


@dataclass(frozen=True, slots=True)
class _Part:
    """A sheet as the workbook lists it."""

    name: str
    path: str
    hidden: bool


def _read(archive: ZipFile, file: str, wanted: set[str]) -> tuple[list[Sheet], list[str]]:
    for info in archive.infolist():
        if info.file_size > LARGEST_PART:
            raise UnreadableError(
                "workbook-too-large",
                f"a part of {info.file_size:,} bytes inside the workbook",
                f"at most {LARGEST_PART:,} bytes",
                "Remove what is not part of the tables, or split the book.",
            )
    main = _main_part(archive)
    root = _xml(archive, main)
    targets = _relations(archive, main)
    parts = [
        _Part(sheet.get("name", ""), path, sheet.get("state", "visible") != "visible")
        for sheet in root.iter("sheet")
        if (path := targets.get(_relation_id(sheet), ("", ""))[1]) and targets[_relation_id(sheet)][0] == "worksheet"
    ]
    shared = {kind: path for kind, path in targets.values() if kind in ("sharedStrings", "styles")}
    from_1904 = any(properties.get("date1904") in ("1", "true") for properties in root.iter("workbookPr"))
    chosen = [part for part in parts if fold(part.name) in wanted]

    strings: list[str] = []
    if chosen and "sharedStrings" in shared:
        with archive.open(shared["sharedStrings"]) as stream:
            strings = parse_strings(stream)
    date_styles = _date_styles(_xml(archive, shared["styles"])) if "styles" in shared else frozenset[str]()

    sheets = []
    for part in chosen:
        with archive.open(part.path) as stream:
            content = parse_sheet(stream, strings, date_styles, from_1904=from_1904)
        sheets.append(
            Sheet(
                file=file,
                name=part.name,
                rows=content.rows,
                typed=True,
                merged=tuple(content.merged),
                hidden_rows=tuple(content.hidden_rows),
                hidden_columns=tuple(content.hidden_columns),
                hidden=part.hidden,
            )
        )
    return sheets, [part.name for part in parts if part not in chosen]


def _main_part(archive: ZipFile) -> str:
    """The path of the workbook part; other packages (documents, slides, .xlsb, .ods) are refused."""
    names = set(archive.namelist())
    found = [path for kind, path in _relations(archive, "").values() if kind == "officeDocument"]
    if not found or not found[0].endswith(".xml") or "workbook" not in posixpath.basename(found[0]):
        kind = "an .xlsb workbook" if any(name.endswith("workbook.bin") for name in names) else "no workbook inside"
        kind = "an OpenDocument file" if "content.xml" in names else kind
        raise UnreadableError(
            "not-a-workbook",
            kind,
            "an .xlsx workbook",
            "Open it in a spreadsheet program and save it as .xlsx.",
        )
    return found[0]


def _relations(archive: ZipFile, part: str) -> dict[str, tuple[str, str]]:
    """Relation id -> (kind, path inside the archive) of what ``part`` refers to."""
    folder, base = posixpath.split(part)
    path = posixpath.join(folder, "_rels", f"{base}.rels")
    if path not in archive.namelist():
        return {}
    return {
        relation.get("Id", ""): (
            relation.get("Type", "").rpartition("/")[2],
            posixpath.normpath(posixpath.join("/", folder, relation.get("Target", ""))).lstrip("/"),
        )
        for relation in _xml(archive, path).iter("Relationship")
        if relation.get("TargetMode") != "External"
    }


def _date_styles(styles: Element) -> frozenset[str]:
    """Numbers, as text, of the cell styles whose number format shows a date."""
    codes = {fmt.get("numFmtId"): fmt.get("formatCode", "") for table in styles.iter("numFmts") for fmt in table}
    formats = [xf.get("numFmtId", "0") for table in styles.iter("cellXfs") for xf in table]
    return frozenset(str(i) for i, fmt in enumerate(formats) if shows_date(int(fmt), codes.get(fmt)))


def shows_date(number: int, code: str | None) -> bool:
    """Whether a number format shows a date: a built-in one by its number, else by its code."""
    if code is None:
        return number in _BUILT_IN_DATES
    return any(letter in _IN_QUOTES.sub("", code.partition(";")[0]).lower() for letter in "dmyhs")


def _xml(archive: ZipFile, path: str) -> Element:
    builder = TreeBuilder()
    with archive.open(path) as stream:
        parse_xml(stream, builder.start, builder.end, builder.data)
    root: Element = builder.close()
    return root


def _relation_id(sheet: Element) -> str:
    return next((value for key, value in sheet.attrib.items() if key.rpartition(":")[2] == "id"), "")
