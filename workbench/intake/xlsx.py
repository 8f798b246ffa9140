"""Reading XLSX: typed cells, so that dates, booleans, errors and bare formulas are seen for what they are."""

from __future__ import annotations

import datetime
import re
import warnings
import zipfile
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

from openpyxl import load_workbook
from openpyxl.utils import get_column_letter

from workbench.errors import InputError

from .faults import Faults, counted, listed
from .raw import HEADER, Cell, CellBody, RawTable, WrongCell

LARGEST_UNPACKED = 4 * 2**30
_TITLE_ROWS = 10


def read_xlsx(path: Path, *, sheet: str | None = None) -> RawTable:
    """Return one sheet of a workbook as a `RawTable` with native cells.

    Without ``sheet`` the workbook must have one sheet with cells. Empty rows and columns around the table are
    left out.

    Raises
    ------
    InputError
        When the file is no workbook, the sheet is not there or not named though there are several, the header
        is not one row of names, or an id is a date, a boolean, an error or a bare formula; with the cell's
        name.
    """
    _check_package(path)
    name, rows = _cells(path, sheet)
    top, left, table = _cropped(path, name, rows)
    width = len(table[0])

    def locate(i: int, j: int) -> str:
        return f"cell {get_column_letter(left + j + 2)}{top + i + 2}"

    _check_header(path, table, lambda j: locate(HEADER, j - 1))
    ids = _id_texts(path, [row[0] for row in table[1:]], [locate(i, -1) for i in range(len(table) - 1)])
    columns = _id_texts(path, table[0][1:], [locate(HEADER, j) for j in range(width - 1)])
    corner = _id_texts(path, table[0][:1], [locate(HEADER, -1)])[0]
    return RawTable(
        path=path,
        form="xlsx",
        corner=corner,
        columns=tuple(columns),
        rows=tuple(ids),
        body=CellBody([row[1:] for row in table[1:]], width - 1, locate),
        notes=(f"{path.name}: read from sheet '{name}'", *_id_notes(path, table)),
    )


def _check_package(path: Path) -> None:
    try:
        with zipfile.ZipFile(path) as package:
            members = {info.filename: info.file_size for info in package.infolist()}
    except (zipfile.BadZipFile, OSError):
        raise InputError(
            f"{path}: the file is damaged or cut short (not a whole zip package); fetch it again"
        ) from None
    if "xl/workbook.xml" not in members:
        other = (
            "an OpenDocument spreadsheet"
            if "content.xml" in members
            else "a zip package without a spreadsheet in it"
        )
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
    except Exception:
        raise InputError(
            f"{path}: the workbook cannot be read; open it in a spreadsheet program and save it again"
        ) from None


def _cells(path: Path, sheet: str | None) -> tuple[str, list[list[Cell]]]:
    book = _open(path, values=True)
    try:
        name = _sheet_name(path, book, sheet)
        rows = _typed_rows(path, book[name])
    finally:
        book.close()
    if _has_formulas(path):
        _mark_bare_formulas(path, name, rows)
    return name, rows


def _sheet_name(path: Path, book: Any, sheet: str | None) -> str:
    names = [worksheet.title for worksheet in book.worksheets]
    if sheet is not None:
        if sheet not in names:
            raise InputError(
                f"{path}: there is no sheet '{sheet}'; the workbook has {listed(names)}: name one of them"
            )
        return sheet
    filled = [
        w.title for w in book.worksheets if any(c is not None for row in _plain_rows(path, w) for c in row)
    ]
    if not filled:
        raise InputError(
            f"{path}: no sheet of the workbook holds a cell; a table needs a header row and rows"
        )
    if len(filled) > 1:
        raise InputError(
            f"{path}: {len(filled)} sheets hold cells: {listed(filled)}; name the one with the table (sheet)"
        )
    return str(filled[0])


def _plain_rows(path: Path, worksheet: Any) -> Iterator[tuple[Any, ...]]:
    worksheet.reset_dimensions()
    return _guarded(path, worksheet.iter_rows(values_only=True))


def _guarded(path: Path, rows: Iterator[Any]) -> Iterator[Any]:
    try:
        yield from rows
    except Exception:
        raise InputError(
            f"{path}: the workbook is damaged; open it in a spreadsheet program and save it again"
        ) from None


def _typed_rows(path: Path, worksheet: Any) -> list[list[Cell]]:
    worksheet.reset_dimensions()
    return [[_typed(cell) for cell in row] for row in _guarded(path, worksheet.iter_rows())]


def _typed(cell: Any) -> Cell:
    value = cell.value
    if value is None or isinstance(value, str):
        return WrongCell("the error value", value) if value is not None and cell.data_type == "e" else value
    if isinstance(value, bool):
        return WrongCell("the boolean", str(value).upper())
    if isinstance(value, int):
        zeros = re.fullmatch("0{2,}", str(cell.number_format or ""))
        return str(value).zfill(len(zeros.group())) if zeros else value
    if isinstance(value, float):
        return value
    if isinstance(value, datetime.datetime | datetime.date | datetime.time | datetime.timedelta):
        return WrongCell("the date", str(value))
    return str(value)


def _has_formulas(path: Path) -> bool:
    with zipfile.ZipFile(path) as package:
        sheets = [n for n in package.namelist() if n.startswith("xl/worksheets/") and n.endswith(".xml")]
        return any(_holds_formula(package, name) for name in sheets)


def _holds_formula(package: zipfile.ZipFile, name: str) -> bool:
    tail = b""
    with package.open(name) as file:
        while chunk := file.read(2**20):
            if b"<f>" in tail + chunk or b"<f " in tail + chunk:
                return True
            tail = chunk[-4:]
    return False


def _mark_bare_formulas(path: Path, name: str, rows: list[list[Cell]]) -> None:
    """Put a `WrongCell` where a formula stands without the value that it had when the file was saved."""
    book = _open(path, values=False)
    try:
        worksheet = book[name]
        worksheet.reset_dimensions()
        for i, row in enumerate(_guarded(path, worksheet.iter_rows())):
            for j, cell in enumerate(row):
                if cell.data_type == "f" and rows[i][j] is None:
                    rows[i][j] = WrongCell("a formula without a stored value", str(cell.value))
    finally:
        book.close()


def _cropped(path: Path, name: str, rows: list[list[Cell]]) -> tuple[int, int, list[list[Cell]]]:
    """Return the first row and column that hold anything, and the rows from there, all of one width."""
    used = [i for i, row in enumerate(rows) if any(_filled(cell) for cell in row)]
    if not used:
        raise InputError(f"{path}: sheet '{name}' holds no cells; a table needs a header row and rows")
    top, bottom = used[0], used[-1]
    columns = [j for i in used for j, cell in enumerate(rows[i]) if _filled(cell)]
    left, right = min(columns), max(columns)
    table = [list(row[left : right + 1]) for row in rows[top : bottom + 1]]
    for row in table:
        row.extend([None] * (right + 1 - left - len(row)))
    if len(table) == 1:
        raise InputError(
            f"{path}: sheet '{name}': row {top + 1} is a header, and no row follows; export the table again"
        )
    return top, left, table


def _filled(cell: Cell) -> bool:
    return cell is not None and cell != ""


def _check_header(path: Path, table: list[list[Cell]], locate: Any) -> None:
    bare = [j for j, cell in enumerate(table[0]) if j and not _filled(cell)]
    if not bare:
        return
    filled = [j for j in bare if any(_filled(row[j]) for row in table[1:])]
    faults = Faults(path)
    for j in filled or bare:
        faults.add(f"{locate(j)} is empty")
    title = len(bare) >= len(table[0]) - 1 or len(bare) > len(table[0]) / 2
    hint = "take title rows above the header out; " if title else ""
    raise faults.error(
        f"{counted(faults.total, 'column')} without a name in the header row",
        f"{hint}give every column a name, in one row",
    )


def _id_texts(path: Path, cells: Sequence[Cell], places: Sequence[str]) -> list[str]:
    faults = Faults(path)
    for cell, place in zip(cells, places, strict=True):
        if isinstance(cell, WrongCell):
            faults.add(f"{place} holds {cell}")
    if faults.total:
        raise faults.error(
            f"{counted(faults.total, 'id')} or name{'s' if faults.total > 1 else ''} that a spreadsheet has "
            "turned into something else",
            "set the cells to the text format, type the names again (SEPT2, not a date), and save; or "
            "deliver TSV",
        )
    return [_id_text(cell) for cell in cells]


def _id_text(cell: Cell) -> str:
    if cell is None:
        return ""
    if isinstance(cell, float) and cell.is_integer() and abs(cell) < 2**53:
        return str(int(cell))
    return str(cell)


def _id_notes(path: Path, table: list[list[Cell]]) -> tuple[str, ...]:
    numbers = [
        _id_text(c) for c in [*(row[0] for row in table[1:]), *table[0][1:]] if isinstance(c, int | float)
    ]
    if not numbers:
        return ()
    return (
        f"{path.name}: {counted(len(numbers), 'id is a number', 'ids are numbers')} in the spreadsheet and "
        "became text "
        f"({listed(numbers, 3)}); zeros at their start, if there were any, are lost",
    )
