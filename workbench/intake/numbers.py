"""The numeric body of a table: cells to float64, exactly as Python's ``float`` reads them, with every fault placed."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from operator import itemgetter

import numpy as np

from .faults import LISTED_FAULTS, Faults, counted, listed, shown
from .raw import ArrayBody, Cell, RawTable, TextBody, WrongCell
from .tokens import MISSING, hint_for, number_of, way_out_for

_NAN = float("nan")


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

    def whole_rows(self) -> bool:
        """Whether every column is read, in order."""
        return list(self.columns) == list(range(self.raw.body.shape[1]))

    def named_place(self, i: int, j: int) -> str:
        """Return where a cell of the body stands, with its feature and sample."""
        row, column = shown(self.raw.rows[i]), shown(self.raw.columns[j])
        feature, sample = (column, row) if self.samples_in == "rows" else (row, column)
        return f"{self.raw.place(i, j)} (feature {feature}, sample {sample})"


def cell_number(cell: Cell) -> float | None:
    """Return a cell's number, NaN when it is missing, or None when it is something else.

    >>> cell_number("0.5"), cell_number(3), cell_number("1,5")
    (0.5, 3.0, None)
    """
    if cell is None:
        return _NAN
    if isinstance(cell, str):
        text = cell.strip()
        return _NAN if text in MISSING else number_of(text)
    if isinstance(cell, int | float):
        try:
            return float(cell)
        except OverflowError:
            return None
    return None


def read_numbers(part: Part) -> np.ndarray:
    """Return the chosen cells as a float64 array (rows x columns as in the file), missing cells as NaN.

    Raises
    ------
    InputError
        When cells hold something else than a number; five are shown with place, feature and sample.
    """
    body = part.raw.body
    if isinstance(body, ArrayBody):
        return body.array[np.ix_(part.rows, part.columns)]
    pick = _picker(part)
    values = np.empty((len(part.rows), len(part.columns)))
    wrong: list[tuple[int, int]] = []
    for k, i in enumerate(part.rows):
        cells = pick(body.row(i))
        row = _quick_row(cells) if isinstance(body, TextBody) and body.is_plain(i) else None
        if row is None:
            row = _careful_row(cells, i, part.columns, wrong)
        values[k] = row
    if wrong:
        raise _text_error(part, wrong)
    return values


def _picker(part: Part) -> Callable[[Sequence[Cell]], Sequence[Cell]]:
    if part.whole_rows():
        return lambda cells: cells
    if len(part.columns) == 1:
        only = part.columns[0]
        return lambda cells: (cells[only],)
    return itemgetter(*part.columns)


def _quick_row(cells: Sequence[Cell]) -> list[float] | None:
    try:
        return list(map(float, cells))  # type: ignore[arg-type]
    except ValueError:
        pass
    try:
        return [_NAN if cell in MISSING else float(cell) for cell in cells]  # type: ignore[arg-type]
    except ValueError:
        return None


def _careful_row(
    cells: Sequence[Cell], i: int, columns: Sequence[int], wrong: list[tuple[int, int]]
) -> list[float]:
    row = []
    for j, cell in zip(columns, cells, strict=True):
        number = cell_number(cell)
        if number is None:
            wrong.append((i, j))
        row.append(_NAN if number is None else number)
    return row


def _text_error(part: Part, wrong: list[tuple[int, int]]) -> Exception:
    faults = Faults(part.raw.path)
    texts = []
    for i, j in wrong:
        cell = None if faults.full else part.raw.body.row(i)[j]
        faults.add("" if cell is None else f"{part.named_place(i, j)}: {_described(cell)}")
        texts += [] if cell is None else [str(cell)]
    return faults.error(
        f"{counted(faults.total, 'cell is no number', 'cells are no numbers')}",
        "; ".join([*_all_text(part, wrong), way_out_for(texts)]),
    )


def _described(cell: Cell) -> str:
    if isinstance(cell, WrongCell):
        return str(cell)
    hint = hint_for(str(cell))
    return f"{shown(cell)}, {hint}" if hint else shown(cell)


def _all_text(part: Part, wrong: list[tuple[int, int]]) -> list[str]:
    """Return advice about rows and columns in which no cell is a number, as annotations among the values are."""
    rows, columns = len(part.rows), len(part.columns)
    by_row: dict[int, int] = {}
    by_column: dict[int, int] = {}
    for i, j in wrong:
        by_row[i] = by_row.get(i, 0) + 1
        by_column[j] = by_column.get(j, 0) + 1
    names = [part.raw.rows[i] for i, count in by_row.items() if count == columns and columns > 1]
    names += [part.raw.columns[j] for j, count in by_column.items() if count == rows and rows > 1]
    return (
        [
            f"{listed(names)} hold{'s' if len(names) == 1 else ''} no number at all: take annotations out of "
            "the table"
        ]
        if names
        else []
    )


def check_range(part: Part, values: np.ndarray, kind: str) -> list[str]:
    """Refuse infinities, and negative or fractional counts; return notes about what is odd but allowed.

    Raises
    ------
    InputError
        With the place, feature and sample of five cells.
    """
    _refuse(
        part,
        np.isinf(values),
        "infinite",
        "leave such cells empty (missing), or mend the division that made them",
    )
    if kind == "counts":
        other = "choose other values for this block (intensities, log, continuous) when it holds no counts"
        _refuse(part, values < 0, "negative, though the values are counts", other)
        fractions = np.isfinite(values) & (values != np.round(values))
        _refuse(
            part,
            fractions,
            "not whole, though the values are counts",
            f"{other}; round estimated counts first",
        )
    negative = int(np.count_nonzero(values < 0)) if kind == "intensities" else 0
    if not negative:
        return []
    return [f"{part.raw.path.name}: {counted(negative, 'intensity is', 'intensities are')} negative"]


def _refuse(part: Part, where: np.ndarray, what: str, way_out: str) -> None:
    total = int(np.count_nonzero(where))
    if not total:
        return
    faults = Faults(part.raw.path, total=total)
    for k, m in np.argwhere(where)[:LISTED_FAULTS]:
        i, j = part.rows[k], part.columns[m]
        faults.kept.append(f"{part.named_place(i, j)}: {shown(part.raw.body.row(i)[j])}")
    raise faults.error(f"{counted(total, 'cell is', 'cells are')} {what}", way_out)
