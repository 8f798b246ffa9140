"""A delivered table as it was read: ids as text, and a body of cells that knows where each cell stands."""

from __future__ import annotations

import csv
from collections.abc import Callable, Sequence
from dataclasses import dataclass
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

    @property
    def shape(self) -> tuple[int, int]:
        """Number of rows and of columns."""
        return len(self.lines), self.width - 1

    def row(self, i: int) -> list[str]:
        """Return the cells of row ``i`` as they are written."""
        return split_line(self.lines[i], self.separator)[1:]

    def is_plain(self, i: int) -> bool:
        """Whether ``float`` reads the cells of row ``i`` as `number_of` does: ASCII, no underscore."""
        line = self.lines[i]
        return line.isascii() and line.find("_", line.find(self.separator)) < 0

    def place(self, i: int, j: int) -> str:
        """Return the line and column, both counted from 1; a short header has no field over the ids."""
        column = j + 1 if i == HEADER and self.short_header else j + 2
        return f"line {self.first_line + i}, column {column}"


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


@dataclass(frozen=True)
class ArrayBody:
    """A numeric array, as .h5ad files and Parquet tables of numbers hold it."""

    array: np.ndarray

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
        row, column = f"row {i + 1}", f"column {j + 1}"
        return column if i == HEADER else row if j < 0 else f"{row}, {column}"


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

    def place(self, i: int, j: int) -> str:
        """Return where a cell stands in the file; -1 is the header (row) or the id column (column)."""
        return self.body.place(i, j)
