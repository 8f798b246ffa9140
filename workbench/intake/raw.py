"""A delivered table as it was read: ids as text, and a body of cells that knows where each cell stands."""

from __future__ import annotations

import csv
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol

import numpy as np

Cell = object
HEADER = -1


@dataclass(frozen=True)
class WrongCell:
    """A spreadsheet cell that is neither text nor number: a date, a boolean, an error, a bare formula."""

    kind: str
    text: str

    def __str__(self) -> str:
        return f"{self.kind} {self.text}".strip()


class Body(Protocol):
    """Cells of a table without its header and its id column."""

    @property
    def shape(self) -> tuple[int, int]:
        """Number of rows and of columns."""

    def row(self, i: int) -> Sequence[Cell]:
        """Return the cells of row ``i``."""

    def place(self, i: int, j: int) -> str:
        """Return where cell ``(i, j)`` stands in the file; ``i = -1`` is the header, ``j = -1`` the id column."""


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

    @property
    def shape(self) -> tuple[int, int]:
        """Number of rows and of columns."""
        return len(self.lines), self.width - 1

    def row(self, i: int) -> list[str]:
        """Return the cells of row ``i`` as they are written."""
        return split_line(self.lines[i], self.separator)[1:]

    def is_plain(self, i: int) -> bool:
        """Whether Python's ``float`` reads the cells of row ``i`` as `number_of` does: ASCII, no underscore."""
        line = self.lines[i]
        return line.isascii() and line.find("_", line.find(self.separator)) < 0

    def place(self, i: int, j: int) -> str:
        """Return the line and column, both counted from 1."""
        return f"line {self.first_line + i}, column {j + 2}"


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
        return self.array[i].tolist()

    def place(self, i: int, j: int) -> str:
        """Return the row and column of the array, both counted from 1."""
        return f"row {i + 1}, column {j + 1}"


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
    notes: tuple[str, ...] = ()

    def place(self, i: int, j: int) -> str:
        """Return where a cell stands in the file; -1 is the header (row) or the id column (column)."""
        return self.body.place(i, j)
