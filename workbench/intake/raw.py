"""A delivered table as it was read: ids as text, and a body of cells that knows where each cell stands."""

from __future__ import annotations

import csv
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Literal, Protocol

import numpy as np

Cell = object
HEADER = -1
_WHOLE_FLOATS = 2**53
_WRONG_CELLS = {
    "date": (
        "the date",
        "set the cells to the number or text format and type them again",
    ),
    "boolean": ("the boolean", "write 0 and 1, or words, in place of booleans"),
    "error": ("the error value", "mend the formulas that give an error, or leave such cells empty"),
    "formula": (
        "a formula without a stored value:",
        "open the workbook in a spreadsheet program and save it, so that values are stored",
    ),
    "other": ("the value", "write numbers or text"),
}


@dataclass(frozen=True)
class WrongCell:
    """A cell that is neither text nor number: a date, a boolean, an error, a formula without a value.

    Attributes
    ----------
    kind
        ``date``, ``boolean``, ``error``, ``formula`` or ``other``.
    text
        What the cell shows.
    """

    kind: Literal["date", "boolean", "error", "formula", "other"]
    text: str

    def __str__(self) -> str:
        return f"{_WRONG_CELLS[self.kind][0]} {self.text}"

    @property
    def way_out(self) -> str:
        """How to mend the cell."""
        return _WRONG_CELLS[self.kind][1]


def cell_text(cell: Cell) -> str:
    """Return the text of a native cell; whole numbers lose their decimal point.

    >>> cell_text(12.0), cell_text("0012"), cell_text(None)
    ('12', '0012', '')
    """
    if cell is None:
        return ""
    if isinstance(cell, WrongCell):
        return cell.text
    if isinstance(cell, float) and cell.is_integer() and abs(cell) < _WHOLE_FLOATS:
        return str(int(cell))
    return str(cell)


class Body(Protocol):
    """Cells of a table without its header and its id column."""

    @property
    def shape(self) -> tuple[int, int]:
        """Number of rows and of columns."""

    def row(self, i: int) -> Sequence[Cell]:
        """Return the cells of row ``i``."""

    def place(self, i: int, j: int) -> str:
        """Return where a cell stands in the file; ``i = -1`` is the header, ``j = -1`` the id column."""

    def core(self, header: int, rows: int, columns: int) -> Body:
        """Return the body without its first rows and columns; row ``header`` (-1: the same) is its header."""


def split_line(line: str, separator: str) -> list[str]:
    """Return the fields of one line; a field that starts with a double quote ends at the closing one.

    Raises
    ------
    csv.Error
        When a quote is not closed on the line, or text follows the closing quote.
    """
    if '"' not in line:
        return line.split(separator)
    return next(csv.reader([line], delimiter=separator, strict=True))


@dataclass(frozen=True)
class TextBody:
    """Lines of a text table, split when they are asked for; every line has been checked before."""

    lines: Sequence[str]
    separator: str
    first_line: int
    width: int
    short_header: bool = False
    before: int = 1
    header_line: int | None = None

    @property
    def shape(self) -> tuple[int, int]:
        """Number of rows and of columns."""
        return len(self.lines), self.width - self.before

    def row(self, i: int) -> list[str]:
        """Return the cells of row ``i`` as they are written."""
        return split_line(self.lines[i], self.separator)[self.before :]

    def written(self, i: int) -> str:
        """Return the cells of row ``i`` as one text, unsplit; empty when a quote stands in the line."""
        line = self.lines[i]
        return "" if '"' in line else line.split(self.separator, self.before)[-1]

    def place(self, i: int, j: int) -> str:
        """Return the line and column, both counted from 1; a short header has no field over the ids."""
        line, column = self.first_line + i, j + 1 + self.before if j >= 0 else 1
        if i == HEADER:
            line = self.header_line or line
            column -= self.short_header
        return f"line {line}, column {column}"

    def core(self, header: int, rows: int, columns: int) -> TextBody:
        """Return the body without its first rows and columns."""
        header_line = self.header_line or self.first_line - 1
        return replace(
            self,
            lines=self.lines[rows:],
            first_line=self.first_line + rows,
            before=self.before + columns,
            header_line=header_line if header == HEADER else self.first_line + header,
            short_header=self.short_header and header == HEADER,
        )


@dataclass(frozen=True)
class CellBody:
    """Native cells: None, text, numbers or `WrongCell`; ``locate`` names the place of each."""

    rows: Sequence[Sequence[Cell]]
    width: int
    locate: Callable[[int, int], str]

    @property
    def shape(self) -> tuple[int, int]:
        """Number of rows and of columns."""
        return len(self.rows), self.width

    def row(self, i: int) -> Sequence[Cell]:
        """Return the cells of row ``i``."""
        return self.rows[i]

    def place(self, i: int, j: int) -> str:
        """Return the place as the format names it."""
        return self.locate(i, j)

    def core(self, header: int, rows: int, columns: int) -> CellBody:
        """Return the body without its first rows and columns."""

        def locate(i: int, j: int) -> str:
            return self.locate(header if i == HEADER else i + rows, j if j < 0 else j + columns)

        return CellBody([row[columns:] for row in self.rows[rows:]], self.width - columns, locate)


@dataclass(frozen=True)
class ArrayBody:
    """A numeric array, as .h5ad files and Parquet tables of numbers hold it."""

    array: np.ndarray
    before: tuple[int, int] = (0, 0)

    @property
    def shape(self) -> tuple[int, int]:
        """Number of rows and of columns."""
        return self.array.shape[0], self.array.shape[1]

    def row(self, i: int) -> Sequence[Cell]:
        """Return the numbers of row ``i``."""
        cells: list[Cell] = self.array[i].tolist()
        return cells

    def place(self, i: int, j: int) -> str:
        """Return the row and column of the array, both counted from 1, or the one of them that an id has."""
        row, column = f"row {i + 1 + self.before[0]}", f"column {j + 1 + self.before[1]}"
        return column if i == HEADER else row if j < 0 else f"{row}, {column}"

    def core(self, header: int, rows: int, columns: int) -> ArrayBody:
        """Return the body without its first rows and columns."""
        if header != HEADER:
            raise ValueError("the ids of an array are no row of it")
        return ArrayBody(self.array[rows:, columns:], (self.before[0] + rows, self.before[1] + columns))


@dataclass(frozen=True)
class RawTable:
    """A table as delivered: ids as text, cells as text (text files) or native (other formats).

    Attributes
    ----------
    path
        The file, as the user named it.
    form
        ``tsv``, ``csv``, ``xlsx``, ``h5ad`` or ``parquet``.
    corner
        Name over the id column; empty when the header has none.
    columns, rows
        Ids of the header and of the id column, untouched.
    body
        The cells.
    corner_lacks
        Whether the header is one field short, as R writes it.
    broken_ids
        Ids of the first column that are no text, each with its place: dates that a spreadsheet made, and so
        on.
    notes
        What was accepted knowingly, one sentence each.
    sheet, array
        Sheet of the workbook, array of the .h5ad file that was read; None for other formats.
    """

    path: Path
    form: str
    corner: str
    columns: tuple[str, ...]
    rows: tuple[str, ...]
    body: Body
    corner_lacks: bool = False
    broken_ids: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    sheet: str | None = None
    array: str | None = None

    def place(self, i: int, j: int) -> str:
        """Return where a cell stands in the file; -1 is the header (row) or the id column (column)."""
        return self.body.place(i, j)

    def core(self, *, header: int = HEADER, rows: int = 0, columns: int = 0) -> RawTable:
        """Return the table without its first rows and columns, all places as in the file.

        ``header`` is the row of the body whose cells name the columns; -1 leaves the names as they are.
        """
        named = header != HEADER
        names = [cell_text(cell) for cell in self.body.row(header)] if named else self.columns
        return replace(
            self,
            corner=self.rows[header] if named else self.corner,
            columns=tuple(names[columns:]),
            rows=self.rows[rows:],
            body=self.body.core(header, rows, columns),
            corner_lacks=self.corner_lacks and not named,
        )
