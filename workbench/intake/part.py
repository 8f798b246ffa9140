"""The part of a table that is read, and the cells of it that cannot be."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property

from workbench.errors import InputError

from .faults import LISTED_NAMES, Faults, counted, listed, shown
from .raw import Cell, RawTable, WrongCell
from .tokens import hint_for, way_out_for

_LEAST_ALL_TEXT = 2


@dataclass(frozen=True)
class Part:
    """The rows and columns of a table that are read, and what they are called in messages.

    Attributes
    ----------
    raw
        The table.
    samples_in
        ``rows`` or ``columns``.
    rows, columns
        Positions in the table's body.
    """

    raw: RawTable
    samples_in: str
    rows: Sequence[int]
    columns: Sequence[int]

    @cached_property
    def whole_rows(self) -> bool:
        """Whether every column is read, in order."""
        return list(self.columns) == list(range(self.raw.body.shape[1]))

    def feature_names(self) -> list[str]:
        """Return the ids of the features that are read, in file order."""
        if self.samples_in == "rows":
            return [self.raw.columns[j] for j in self.columns]
        return [self.raw.rows[i] for i in self.rows]

    def feature_name(self, i: int, j: int) -> str:
        """Return the feature of a cell of the body."""
        return self.raw.columns[j] if self.samples_in == "rows" else self.raw.rows[i]

    def sample_names(self) -> list[str]:
        """Return the ids of the samples that are read, in file order."""
        if self.samples_in == "rows":
            return [self.raw.rows[i] for i in self.rows]
        return [self.raw.columns[j] for j in self.columns]

    def cell(self, i: int, j: int) -> Cell:
        """Return one cell of the body."""
        return self.raw.body.row(i)[j]

    def named_place(self, i: int, j: int) -> str:
        """Return where a cell of the body stands, with its feature and sample."""
        row, column = shown(self.raw.rows[i]), shown(self.raw.columns[j])
        feature, sample = (column, row) if self.samples_in == "rows" else (row, column)
        return f"{self.raw.place(i, j)} (feature {feature}, sample {sample})"


@dataclass
class WrongCells:
    """Cells that are no numbers: all are counted, the first five are shown.

    Rows and columns without a single number are named apart, since they are annotations and not faulty
    readings.
    """

    part: Part
    faults: Faults = field(init=False)
    first: list[Cell] = field(default_factory=list)
    bare_in_row: Counter[int] = field(default_factory=Counter)
    bare_in_column: Counter[int] = field(default_factory=Counter)

    def __post_init__(self) -> None:
        self.faults = Faults(self.part.raw.path)

    def add(self, i: int, j: int, cell: Cell) -> None:
        """Count one cell."""
        hint = "" if isinstance(cell, WrongCell) else hint_for(str(cell))
        if not hint:
            self.bare_in_row[i] += 1
            self.bare_in_column[j] += 1
        if self.faults.full:
            self.faults.total += 1
            return
        text = str(cell) if isinstance(cell, WrongCell) else shown(cell)
        self.faults.add(f"{self.part.named_place(i, j)}: {text}{', ' if hint else ''}{hint}")
        self.first.append(cell)

    def error(self, summary: str) -> InputError:
        """Return the error; ``summary`` follows the number of cells."""
        ways = [
            cell.way_out if isinstance(cell, WrongCell) else way_out_for(str(cell)) for cell in self.first
        ]
        return self.faults.error(
            f"{counted(self.faults.total, 'cell holds', 'cells hold')} {summary}",
            "; ".join(dict.fromkeys([*self._annotations(), *ways])),
        )

    def _annotations(self) -> list[str]:
        rows, columns = len(self.part.rows), len(self.part.columns)
        names = [self.part.raw.rows[i] for i, count in self.bare_in_row.items() if count == columns]
        names = names if columns >= _LEAST_ALL_TEXT else []
        if rows >= _LEAST_ALL_TEXT:
            names += [self.part.raw.columns[j] for j, count in self.bare_in_column.items() if count == rows]
        if not names:
            return []
        return [f"no cell of {listed(names, LISTED_NAMES)} is a number: take annotations out of the table"]
