"""The numeric body of a table: cells to float64 exactly as Python's ``float`` reads them, faults placed."""

from __future__ import annotations

import warnings
from collections import Counter
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from operator import itemgetter
from typing import Any

import numpy as np

from workbench.errors import InputError

from .faults import Faults, counted, listed, shown
from .marks import PLAIN, MarkFinder, Marks
from .part import Part, WrongCells
from .quick import quick_numbers
from .raw import ArrayBody, Cell, TextBody, WrongCell
from .tokens import MISSING, is_comma_number, is_under_limit

_NAN = float("nan")
_BLOCK = 256
_MOST_SEEN = 50_000


@dataclass(frozen=True)
class Numbers:
    """The numbers of a table and how they were written.

    Attributes
    ----------
    values
        float64 array, rows x columns as in the file; missing = NaN.
    marks
        Decimal mark and thousands separator.
    under_limit
        For each feature that has some, the number of cells such as ``<LOD``, which count as missing.
    notes
        What was accepted knowingly.
    """

    values: np.ndarray
    marks: Marks = PLAIN
    under_limit: Mapping[str, int] = field(default_factory=dict)
    notes: tuple[str, ...] = ()


def cell_number(cell: Cell, marks: Marks = PLAIN) -> float | None:
    """Return a cell's number, NaN when it is missing, or None when it is something else.

    >>> cell_number("0.5"), cell_number(3), cell_number("1,5"), cell_number("1,5", Marks(","))
    (0.5, 3.0, None, 1.5)
    """
    if cell is None:
        return _NAN
    if isinstance(cell, str):
        text = cell.strip()
        return _NAN if text in MISSING else marks.number(text)
    if isinstance(cell, int | float):
        try:
            return float(cell)
        except OverflowError:
            return None
    return None


def read_numbers(part: Part, decimal: str | None = None, *, whole: bool = False) -> Numbers:
    """Return the chosen cells as a float64 array (rows x columns as in the file), missing cells as NaN.

    Cells such as ``<LOD`` count as missing and are counted for each feature. Decimal commas and thousands
    separators are read where all numbers of the table agree on one writing (see `MarkFinder`).

    Parameters
    ----------
    decimal
        ``.`` or ``,``; found when None.
    whole
        Whether the numbers must be whole (counts), which rules some writings out.

    Raises
    ------
    InputError
        When cells hold something else than a number, or the writing is not clear; five are shown with place,
        feature and sample.
    """
    body = part.raw.body
    if isinstance(body, ArrayBody):
        return Numbers(body.array[np.ix_(part.rows, part.columns)])
    return _Reader(part).read(decimal, whole)


class _Reader:
    """Reads rows quickly where they hold plain numbers, and cell by cell where they do not."""

    def __init__(self, part: Part) -> None:
        self.part = part
        self.pick = _picker(part)
        self.is_text = isinstance(part.raw.body, TextBody)
        shape = (len(part.rows), len(part.columns))
        # Stored samples x features, the way they are needed, so that no second array is made.
        self.values = np.empty(shape) if part.samples_in == "rows" else np.empty(shape[::-1]).T

    def read(self, decimal: str | None, whole: bool) -> Numbers:
        marks = Marks(decimal or ".")
        with _unread_as_errors():
            left = self._fill(range(len(self.part.rows)), marks)
            if decimal == "," or self._has_commas(left):
                found = self._find_marks(decimal, whole)
                if found is not None and found != marks:
                    marks = found
                    left = self._fill(range(len(self.part.rows)), marks)
        careful = _Careful(self.part, marks)
        for k in left:
            self.values[k] = careful.row(self._cells(k), self.part.rows[k])
        careful.check(decimal)
        notes = writing_notes(self.part, marks, careful.under_limit, list(careful.tokens))
        return Numbers(self.values, marks, dict(careful.under_limit), tuple(notes))

    def _cells(self, k: int) -> Sequence[Cell]:
        return self.pick(self.part.raw.body.row(self.part.rows[k]))

    def _fill(self, rows: range, marks: Marks) -> list[int]:
        """Fill in the rows that hold plain numbers and missing tokens; return the others."""
        if not self.is_text or marks.thousands:
            return list(rows)
        left: list[int] = []
        block = np.empty((_BLOCK, len(self.part.columns)))
        for start in range(0, len(rows), _BLOCK):
            several = rows[start : start + _BLOCK]
            for m, k in enumerate(several):
                found = self._quick(k, marks.decimal)
                if found is None:
                    left.append(k)
                else:
                    block[m] = found
            self.values[several.start : several.stop] = block[: len(several)]
        return left

    def _quick(self, k: int, decimal: str) -> np.ndarray | None:
        body = self.part.raw.body
        assert isinstance(body, TextBody)
        i = self.part.rows[k]
        text, separator = body.written(i) if self.part.whole_rows else "", body.separator
        if not text:
            cells: Sequence[Any] = self._cells(k)
            text, separator = ";".join(cells), ";"
        if decimal == ",":
            if "." in text or separator == ",":
                return None
            text = text.replace(",", ".")
        return quick_numbers(text, separator, len(self.part.columns))

    def _has_commas(self, left: Sequence[int]) -> bool:
        return any(isinstance(cell, str) and is_comma_number(cell) for k in left for cell in self._cells(k))

    def _find_marks(self, decimal: str | None, whole: bool) -> Marks | None:
        finder = MarkFinder(decimal, whole)
        for k in range(len(self.part.rows)):
            mark = finder.only if self.is_text else None
            found = None if mark is None else self._quick(k, mark)
            if mark is None or found is None:
                finder.look(cell.strip() for cell in self._cells(k) if isinstance(cell, str))
            else:
                finder.take(found, mark, decimals=bool((found != np.rint(found)).any()))
        if finder.unclear:
            raise self._unclear()
        if whole and finder.marks() is None:
            self._refuse_fractions(self._find_marks(decimal, False))
        return finder.marks()

    def _refuse_fractions(self, marks: Marks | None) -> None:
        """Refuse counts whose cells agree on one writing, in which they are no whole numbers."""
        if marks is None or marks.plain:
            return
        faults = Faults(self.part.raw.path)
        for place, cell in self._comma_cells():
            number = marks.number(cell.strip())
            if number is not None and number != np.rint(number):
                faults.add(f"{place}: {shown(cell)}")
        if faults.total:
            raise faults.error(
                f"{counted(faults.total, 'cell is', 'cells are')} not whole (all numbers are written with "
                f"{marks.told()}), though the values are counts",
                "choose other values for this block (intensities, log, continuous) when it holds no counts",
            )

    def _unclear(self) -> InputError:
        faults = Faults(self.part.raw.path)
        for place, cell in self._comma_cells():
            faults.add(f"{place}: {shown(cell)}")
        return faults.error(
            f"{counted(faults.total, 'cell has', 'cells have')} a comma or a point that may be a decimal mark "
            "or part thousands, and nothing in the table tells which",
            "say decimal = ',' or decimal = '.' for this table",
        )

    def _comma_cells(self) -> Iterator[tuple[str, str]]:
        for k in range(len(self.part.rows)):
            for j, cell in zip(self.part.columns, self._cells(k), strict=True):
                if isinstance(cell, str) and is_comma_number(cell):
                    yield self.part.named_place(self.part.rows[k], j), cell


def _picker(part: Part) -> Callable[[Sequence[Cell]], Sequence[Cell]]:
    if part.whole_rows:
        return lambda cells: cells
    if len(part.columns) == 1:
        only = part.columns[0]
        return lambda cells: (cells[only],)
    return itemgetter(*part.columns)


class _Careful:
    """Reads rows cell by cell, counts what is under a limit, and collects what is no number."""

    def __init__(self, part: Part, marks: Marks) -> None:
        self.part, self.marks = part, marks
        self.wrong = WrongCells(part)
        self.under_limit: Counter[str] = Counter()
        self.tokens: dict[str, None] = {}
        self.seen: dict[Cell, float | None] = {}

    def row(self, cells: Sequence[Cell], i: int) -> list[float]:
        row = []
        for j, cell, number in zip(self.part.columns, cells, self._row_numbers(cells), strict=True):
            if number is None and isinstance(cell, str) and is_under_limit(cell):
                self.under_limit[self.part.feature_name(i, j)] += 1
                self.tokens[cell.strip()] = None
            elif number is None:
                self.wrong.add(i, j, cell)
            row.append(_NAN if number is None else number)
        return row

    def _row_numbers(self, cells: Sequence[Cell]) -> list[float | None]:
        if not self.marks.plain or not all(isinstance(cell, str) for cell in cells):
            return [self._number(cell) for cell in cells]
        line = "".join(map(str, cells))
        if not line.isascii() or "_" in line:
            return [self._number(cell) for cell in cells]
        return [self._plain_number(str(cell)) for cell in cells]

    def _plain_number(self, text: str) -> float | None:
        """Return the number of an ASCII text without underscores, which ``float`` reads as `number_of` does."""
        try:
            return float(text)
        except ValueError:
            return self._number(text)

    def _number(self, cell: Cell) -> float | None:
        if not isinstance(cell, str):
            return None if isinstance(cell, WrongCell) else cell_number(cell)
        if cell not in self.seen:
            if len(self.seen) >= _MOST_SEEN:
                return cell_number(cell, self.marks)
            self.seen[cell] = cell_number(cell, self.marks)
        return self.seen[cell]

    def check(self, decimal: str | None) -> None:
        if self.wrong.faults.total:
            with_commas = " with decimal commas, as decimal = ',' says" if decimal == "," else ""
            raise self.wrong.error(f"no number{with_commas}")


class _unread_as_errors(warnings.catch_warnings):  # noqa: N801 - reads as a statement
    """While it lasts, a text that numpy cannot read to its end raises `DeprecationWarning`."""

    def __enter__(self) -> None:
        super().__enter__()
        warnings.simplefilter("error", DeprecationWarning)


def writing_notes(
    part: Part, marks: Marks, under_limit: Mapping[str, int], tokens: Sequence[str]
) -> list[str]:
    """Return what is to be told of a writing other than the plain one, and of cells under a limit."""
    name, notes = part.raw.path.name, []
    if not marks.plain:
        notes.append(f"{name}: numbers are written with {marks.told()}, as all of them agree; read as such")
    if under_limit:
        cells = counted(sum(under_limit.values()), "cell")
        features = counted(len(under_limit), "feature")
        notes.append(
            f"{name}: {cells} of {features} under a limit or not detected ({listed(tokens, 3)}): counted as missing"
        )
    return notes
