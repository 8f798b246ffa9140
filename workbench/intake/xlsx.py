"""Reading XLSX: the table of a sheet, with the name of every cell (C7) for those who find fault with it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

from openpyxl.utils import get_column_letter

from workbench.errors import InputError

from .faults import Faults, counted, listed
from .raw import HEADER, Cell, CellBody, RawTable, WrongCell, cell_text
from .titles import MOST_ABOVE, rows_above
from .workbook import is_filled, read_cells

_ID_WAY_OUT = "set these cells to the text format, type the names again and save; or deliver the table as TSV"


def read_xlsx(path: Path, *, sheet: str | None = None) -> RawTable:
    """Return one sheet of a workbook as a `RawTable` with native cells.

    Without ``sheet`` the workbook must have one sheet with cells, or one alone that can be a table. Empty rows
    and columns around the table are left out, and titles above its header (see `rows_above`), which are told.
    Ids that are dates, booleans or errors are kept as ``broken_ids``.

    Raises
    ------
    InputError
        When the file is no workbook, the sheet is not there or not named though there are several, or a name
        in the header is no text; with the cell's name.
    """
    name, rows = read_cells(path, sheet)
    top, left, table = _cropped(path, name, rows)
    above = rows_above([list(map(cell_text, row)) for row in table[: MOST_ABOVE + 1]], len(table[0]))
    titles = [cell_text(cell) for row in table[:above] for cell in row if is_filled(cell)]
    if above:
        top, left, table = _cropped(path, name, [*[[]] * (top + above), *rows[top + above :]])
    width = len(table[0])

    def locate(i: int, j: int) -> str:
        return f"cell {get_column_letter(left + j + 2)}{top + i + 2}"

    _check_header(path, table, lambda j: locate(HEADER, j - 1))
    return RawTable(
        path=path,
        form="xlsx",
        corner=cell_text(table[0][0]),
        columns=tuple(cell_text(cell) for cell in table[0][1:]),
        rows=tuple(cell_text(row[0]) for row in table[1:]),
        body=CellBody([row[1:] for row in table[1:]], width - 1, locate),
        broken_ids=tuple(_broken([row[0] for row in table[1:]], lambda i: locate(i, -1))),
        notes=(
            f"{path.name}: read from sheet '{name}'",
            *_above_notes(path, above, titles),
            *_number_notes(path, table),
        ),
        sheet=name,
    )


def _above_notes(path: Path, above: int, titles: Sequence[str]) -> list[str]:
    said = f": {listed(titles, 3)}" if titles else ""
    return [f"{path.name}: {counted(above, 'row')} before the header left out{said}"] if above else []


def _cropped(path: Path, name: str, rows: list[list[Cell]]) -> tuple[int, int, list[list[Cell]]]:
    """Return the first row and column that hold anything, and the rows from there, all of one width."""
    used = [i for i, row in enumerate(rows) if any(map(is_filled, row))]
    if not used:
        raise InputError(f"{path}: sheet '{name}' holds no cells; a table needs a header row and rows")
    top, bottom = used[0], used[-1]
    if top == bottom:
        raise InputError(
            f"{path}: sheet '{name}': row {top + 1} is a header, and no row follows; export the table again"
        )
    columns = {j for i in used for j, cell in enumerate(rows[i]) if is_filled(cell)}
    left, right = min(columns), max(columns)
    table = [list(row[left : right + 1]) for row in rows[top : bottom + 1]]
    for row in table:
        row.extend([None] * (right + 1 - left - len(row)))
    return top, left, table


def _check_header(path: Path, table: list[list[Cell]], locate: Callable[[int], str]) -> None:
    broken = _broken(table[0], locate)
    if broken:
        raise Faults(path, len(broken), broken).error(
            f"{counted(len(broken), 'name is', 'names are')} no text in the header row", _ID_WAY_OUT
        )


def _broken(cells: Sequence[Cell], locate: Callable[[int], str]) -> list[str]:
    return [f"{locate(k)} holds {cell}" for k, cell in enumerate(cells) if isinstance(cell, WrongCell)]


def _number_notes(path: Path, table: list[list[Cell]]) -> list[str]:
    ids = [*(row[0] for row in table[1:]), *table[0][1:]]
    numbers = [cell_text(cell) for cell in ids if isinstance(cell, int | float)]
    if not numbers:
        return []
    return [
        f"{path.name}: {counted(len(numbers), 'id is a number', 'ids are numbers')} in the spreadsheet and "
        f"became text ({listed(numbers, 3)}); zeros at their start, if there were any, are lost"
    ]
