"""Tables of numbers and text (clinical readings): each feature is a number, or text coded by its levels."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from .faults import Faults, counted, listed, shown
from .numbers import Part, cell_number
from .raw import Cell, WrongCell
from .tokens import hint_for, is_comma_number, missing_among, way_out_for

MOST_LEVELS = 10
BOOLEAN = "the boolean"


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
    rows = [part.raw.body.row(i) for i in part.rows]
    cells = [[row[j] for j in part.columns] for row in rows]
    by_feature = list(zip(*cells, strict=True)) if part.samples_in == "rows" else cells
    names = (
        [part.raw.columns[j] for j in part.columns]
        if part.samples_in == "rows"
        else [part.raw.rows[i] for i in part.rows]
    )
    columns, levels, wrong = [], {}, []
    for position, (name, column) in enumerate(zip(names, by_feature, strict=True)):
        numbers = [cell_number(_plain(cell)) for cell in column]
        bad = _wrong_cells(column, numbers)
        wrong += [(position, sample) for sample in bad]
        if any(number is None for number in numbers) and not bad:
            codes, levels[name] = _coded(column)
            columns.append(codes)
        else:
            columns.append(np.array([np.nan if n is None else n for n in numbers], dtype=float))
    if wrong:
        raise _mixed_error(part, wrong)
    values = np.column_stack(columns) if columns else np.empty((0, 0))
    return MixedValues(values, levels, _level_notes(part, levels, values.shape[0]))


def _plain(cell: Cell) -> Cell:
    return cell.text if isinstance(cell, WrongCell) and cell.kind == BOOLEAN else cell


def _wrong_cells(column: Sequence[Cell], numbers: Sequence[float | None]) -> list[int]:
    """Return the positions of cells that fit neither reading of their feature."""
    different = {n for n in numbers if n is not None and n == n}
    readings = len(different) > MOST_LEVELS
    return [
        k
        for k, (cell, number) in enumerate(zip(column, numbers, strict=True))
        if number is None
        and (readings or isinstance(_plain(cell), WrongCell) or is_comma_number(str(_plain(cell))))
    ]


def _coded(column: Sequence[Cell]) -> tuple[np.ndarray, tuple[str, ...]]:
    texts = ["" if cell is None else str(_plain(cell)).strip() for cell in column]
    missing = missing_among(set(texts))
    levels = tuple(sorted(set(texts) - missing))
    code = {level: float(k) for k, level in enumerate(levels)}
    return np.array([code.get(text, np.nan) for text in texts]), levels


def _mixed_error(part: Part, wrong: list[tuple[int, int]]) -> Exception:
    faults = Faults(part.raw.path)
    texts = []
    for feature, sample in wrong:
        if faults.full:
            faults.add("")
            continue
        k, m = (sample, feature) if part.samples_in == "rows" else (feature, sample)
        i, j = part.rows[k], part.columns[m]
        cell = part.raw.body.row(i)[j]
        hint = "" if isinstance(cell, WrongCell) else hint_for(str(cell))
        text = str(cell) if isinstance(cell, WrongCell) else shown(cell)
        faults.add(f"{part.named_place(i, j)}: {text}{', ' + hint if hint else ''}")
        texts.append(str(cell))
    return faults.error(
        f"{counted(faults.total, 'cell is', 'cells are')} no number in a feature of numbers",
        way_out_for(texts),
    )


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
