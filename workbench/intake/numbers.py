"""The numeric body of a table: cells to float64 exactly as Python's ``float`` reads them, faults placed."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from operator import itemgetter
from typing import Any

import numpy as np

from .faults import LISTED_FAULTS, Faults, counted, shown
from .part import Part, WrongCells
from .raw import ArrayBody, Cell, TextBody, cell_text
from .tokens import MISSING, number_of

_NAN = float("nan")
_MOST_SEEN = 50_000


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
    pick, seen, wrong = _picker(part), _Seen(), WrongCells(part)
    values = np.empty((len(part.rows), len(part.columns)))
    for k, i in enumerate(part.rows):
        cells = pick(body.row(i))
        row = _quick_row(cells, seen) if isinstance(body, TextBody) and body.is_plain(i) else None
        values[k] = _careful_row(cells, i, wrong) if row is None else row
    if wrong.faults.total:
        raise wrong.error("no number")
    return values


def _picker(part: Part) -> Callable[[Sequence[Cell]], Sequence[Cell]]:
    if part.whole_rows():
        return lambda cells: cells
    if len(part.columns) == 1:
        only = part.columns[0]
        return lambda cells: (cells[only],)
    return itemgetter(*part.columns)


class _Seen(dict[str, float]):
    """Numbers of the texts that occurred before: counts and missing tokens come again and again."""

    def __missing__(self, text: str) -> float:
        number = _NAN if text in MISSING else float(text)
        self[text] = number
        return number


def _quick_row(cells: Sequence[Any], seen: _Seen) -> np.ndarray | None:
    try:
        return np.fromiter(map(float, cells), dtype=np.float64, count=len(cells))
    except ValueError:
        pass
    try:
        if len(seen) < _MOST_SEEN:
            return np.fromiter(map(seen.__getitem__, cells), dtype=np.float64, count=len(cells))
        return np.array([_NAN if cell in MISSING else float(cell) for cell in cells])
    except ValueError:
        return None


def _careful_row(cells: Sequence[Cell], i: int, wrong: WrongCells) -> list[float]:
    row = []
    for j, cell in zip(wrong.part.columns, cells, strict=True):
        number = cell_number(cell)
        if number is None:
            wrong.add(i, j, cell)
        row.append(_NAN if number is None else number)
    return row


def check_range(part: Part, values: np.ndarray, kind: str) -> list[str]:
    """Refuse infinities, and negative or fractional counts; return notes about what is odd but allowed.

    Raises
    ------
    InputError
        With the place, feature and sample of five cells.
    """
    _refuse(part, np.isinf(values), "infinite", "leave such cells empty (missing), or mend what made them")
    if kind == "counts":
        other = "choose other values for this block (intensities, log, continuous) when it holds no counts"
        _refuse(part, values < 0, "negative, though the values are counts", other)
        fractions = np.isfinite(values) & (values != np.rint(values))
        round_first = f"round estimated counts first; {other}"
        _refuse(part, fractions, "not whole, though the values are counts", round_first)
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
        faults.kept.append(f"{part.named_place(i, j)}: {shown(cell_text(part.cell(i, j)))}")
    raise faults.error(f"{counted(total, 'cell is', 'cells are')} {what}", way_out)
