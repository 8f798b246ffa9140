"""The cells of one sheet of an XLSX workbook, each seen for what it is: text, number, date, boolean, error, formula."""

from __future__ import annotations

import datetime
import re
import warnings
import zipfile
from collections.abc import Iterator
from itertools import islice
from pathlib import Path
from typing import Any

from openpyxl import load_workbook

from workbench.errors import InputError

from .faults import listed
from .raw import Cell, WrongCell

LARGEST_UNPACKED = 4 * 2**30
_CHUNK = 2**20


def read_cells(path: Path, sheet: str | None) -> tuple[str, list[list[Cell]]]:
    """Return the name of a sheet and its rows of cells; without ``sheet`` the only one that can be a table.

    Cells are None, text, int, float, or `WrongCell`. A whole number in a format of zeros (``0000``) is text
    with them.

    Raises
    ------
    InputError
        When the file is no workbook or a damaged one, there is no such sheet, or several can be tables and
        none was named.
    """
    _check_package(path)
    book = _open(path, values=True)
    try:
        name = _sheet_name(path, book, sheet)
        rows = [[_typed(cell) for cell in row] for row in _rows(path, book[name])]
    finally:
        book.close()
    if _has_formulas(path):
        _mark_bare_formulas(path, name, rows)
    return name, rows


def is_filled(cell: Cell) -> bool:
    """Return whether a cell holds anything."""
    return cell is not None and cell != ""


def _check_package(path: Path) -> None:
    try:
        with zipfile.ZipFile(path) as package:
            members = {info.filename: info.file_size for info in package.infolist()}
    except (zipfile.BadZipFile, OSError, ValueError, NotImplementedError, RuntimeError):
        raise InputError(
            f"{path}: the file is damaged or cut short (not a whole zip package); fetch it again"
        ) from None
    if "xl/workbook.xml" not in members:
        other = "a zip package without a spreadsheet in it"
        other = "an OpenDocument spreadsheet" if "content.xml" in members else other
        other = "a binary workbook (.xlsb)" if "xl/workbook.bin" in members else other
        raise InputError(
            f"{path}: this is {other}, not an .xlsx workbook; save the table as .xlsx, TSV or CSV"
        )
    if sum(members.values()) > LARGEST_UNPACKED:
        raise InputError(
            f"{path}: the workbook unpacks to more than {LARGEST_UNPACKED // 2**30} GB; save the one sheet "
            "as TSV"
        )


def _open(path: Path, *, values: bool) -> Any:
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            return load_workbook(path, read_only=True, data_only=values)
    except Exception:  # the library raises whatever its parsers meet in a damaged file
        raise _damaged(path) from None


def _damaged(path: Path) -> InputError:
    return InputError(
        f"{path}: the workbook is damaged and cannot be read; open it in a spreadsheet program and save it "
        "again"
    )


def _rows(path: Path, worksheet: Any) -> Iterator[Any]:
    """Yield rows of cells; the size that the sheet declares is not believed, since writers get it wrong."""
    worksheet.reset_dimensions()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            yield from worksheet.iter_rows()
    except Exception:  # as above
        raise _damaged(path) from None


def _sheet_name(path: Path, book: Any, sheet: str | None) -> str:
    names = [str(worksheet.title) for worksheet in book.worksheets]
    if sheet is not None:
        if sheet not in names:
            raise InputError(
                f"{path}: there is no sheet '{sheet}'; the workbook has {listed(names)}: name one of them"
            )
        return sheet
    filled = [name for name in names if _holds_cells(path, book[name])]
    if not filled:
        raise InputError(
            f"{path}: no sheet of the workbook holds a cell; a table needs a header row and rows"
        )
    tables = [name for name in filled if len(filled) > 1 and _can_be_table(path, book[name])]
    if len(filled) > 1 and len(tables) != 1:
        said = f", {len(tables)} of them tables: {listed(tables)}" if tables else f": {listed(filled)}"
        raise InputError(
            f"{path}: {len(filled)} sheets hold cells{said}; name the one with the table (sheet)"
        )
    return (tables or filled)[0]


def _can_be_table(path: Path, worksheet: Any) -> bool:
    """Whether two rows or more hold two cells or more: titles, remarks and lists of words do not."""
    wide = (1 for row in _rows(path, worksheet) if sum(is_filled(cell.value) for cell in row) > 1)
    return len(list(islice(wide, 2))) > 1


def _holds_cells(path: Path, worksheet: Any) -> bool:
    return any(is_filled(cell.value) for row in _rows(path, worksheet) for cell in row)


def _typed(cell: Any) -> Cell:
    value = cell.value
    if value is None or isinstance(value, str):
        return WrongCell("error", value) if value is not None and cell.data_type == "e" else value
    if isinstance(value, bool):
        return WrongCell("boolean", str(value).upper())
    if isinstance(value, int):
        zeros = re.fullmatch("0{2,}", str(cell.number_format or ""))
        return str(value).zfill(len(zeros.group())) if zeros else value
    if isinstance(value, float):
        return value
    if isinstance(value, datetime.datetime | datetime.date | datetime.time | datetime.timedelta):
        return WrongCell("date", str(value).removesuffix(" 00:00:00"))
    return str(value)


def _has_formulas(path: Path) -> bool:
    with zipfile.ZipFile(path) as package:
        sheets = [n for n in package.namelist() if n.startswith("xl/worksheets/") and n.endswith(".xml")]
        return any(_holds_formula(package, name) for name in sheets)


def _holds_formula(package: zipfile.ZipFile, name: str) -> bool:
    end = b""
    with package.open(name) as file:
        while chunk := file.read(_CHUNK):
            if re.search(rb"<(\w+:)?f[ >/]", end + chunk):
                return True
            end = chunk[-32:]
    return False


def _mark_bare_formulas(path: Path, name: str, rows: list[list[Cell]]) -> None:
    """Put a `WrongCell` where a formula stands without the value that it had when the file was saved."""
    book = _open(path, values=False)
    try:
        for i, row in enumerate(_rows(path, book[name])):
            for j, cell in enumerate(row):
                if cell.data_type == "f" and rows[i][j] is None:
                    rows[i][j] = WrongCell("formula", str(cell.value))
    finally:
        book.close()
