"""Tables of numbers and text (clinical readings): each feature is a number, or text coded by its levels."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from .faults import counted, listed
from .numbers import cell_number
from .part import Part, WrongCells
from .raw import Cell, WrongCell
from .tokens import is_comma_number, is_padded, missing_among

MOST_LEVELS = 10


@dataclass(frozen=True)
class MixedValues:
    """A table of numbers and coded text.

    Attributes
    ----------
    values
        ndarray (samples, features): numbers, or positions in ``levels``; missing = NaN.
    levels
        For each feature of text its sorted levels, keyed by feature id.
    notes
        What was accepted knowingly.
    """

    values: np.ndarray
    levels: dict[str, tuple[str, ...]]
    notes: tuple[str, ...]


def read_mixed(part: Part) -> MixedValues:
    """Return the chosen cells with every feature read as a number or as text.

    A feature is a number when all its cells that are not missing are; else text, whose levels are its
    different texts without blanks at their ends, sorted. A feature with text among more than ten different
    numbers is refused (``<5`` in a column of readings), and so is a number with a decimal comma or thousands
    separators. ``-`` is a missing cell unless ``+`` is a level of the same feature.

    Raises
    ------
    InputError
        With place, feature and sample of five cells.
    """
    names, features = part.feature_names(), _by_feature(part)
    wrong, levels = WrongCells(part), {}
    values = np.empty((len(features[0]), len(features)))
    for position, cells in enumerate(features):
        numbers = [_reading(cell) for cell in cells]
        misfits = _misfits(cells, numbers)
        for sample in misfits:
            wrong.add(*_position(part, position, sample), cells[sample])
        if not misfits and None in numbers:
            values[:, position], levels[names[position]] = _coded(cells)
        else:
            values[:, position] = [np.nan if number is None else number for number in numbers]
    if wrong.faults.total:
        raise wrong.error("no number, in a feature of numbers")
    return MixedValues(values, levels, _level_notes(part, levels, values.shape[0]))


def _by_feature(part: Part) -> list[Sequence[Cell]]:
    rows = [part.raw.body.row(i) for i in part.rows]
    cells = [[_spoken(row[j]) for j in part.columns] for row in rows]
    return list(zip(*cells, strict=True)) if part.samples_in == "rows" else list(cells)


def _position(part: Part, feature: int, sample: int) -> tuple[int, int]:
    """Return the row and column of the table's body."""
    k, m = (sample, feature) if part.samples_in == "rows" else (feature, sample)
    return part.rows[k], part.columns[m]


def _spoken(cell: Cell) -> Cell:
    """Return a boolean cell as its text, other cells as they are."""
    return cell.text if isinstance(cell, WrongCell) and cell.kind == "boolean" else cell


def _reading(cell: Cell) -> float | None:
    """Return a cell's number; codes such as ``007`` are text."""
    if isinstance(cell, str) and is_padded(cell):
        return None
    return cell_number(cell)


def _misfits(cells: Sequence[Cell], numbers: Sequence[float | None]) -> list[int]:
    """Return the positions of cells that fit neither reading of their feature."""
    different = {number for number in numbers if number is not None and number == number}
    readings = len(different) > MOST_LEVELS
    return [
        k
        for k, (cell, number) in enumerate(zip(cells, numbers, strict=True))
        if number is None and (readings or isinstance(cell, WrongCell) or is_comma_number(str(cell)))
    ]


def _coded(cells: Sequence[Cell]) -> tuple[list[float], tuple[str, ...]]:
    texts = ["" if cell is None else str(cell).strip() for cell in cells]
    levels = tuple(sorted(set(texts) - missing_among(set(texts))))
    code = {level: float(k) for k, level in enumerate(levels)}
    return [code.get(text, np.nan) for text in texts], levels


def _level_notes(part: Part, levels: dict[str, tuple[str, ...]], n: int) -> tuple[str, ...]:
    if not levels:
        return ()
    name = part.raw.path.name
    notes = [f"{name}: {counted(len(levels), 'feature is', 'features are')} text: {listed(list(levels))}"]
    many = [feature for feature, its in levels.items() if len(its) > MOST_LEVELS and 2 * len(its) > n]
    if many:
        notes.append(
            f"{name}: text features with a level for nearly every sample, perhaps no measurements: "
            f"{listed(many)}"
        )
    return tuple(notes)
