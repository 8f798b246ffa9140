"""Tables of numbers and text (clinical readings): each feature is a number, or text coded by its levels."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from workbench.errors import InputError

from .faults import counted, listed
from .marks import PLAIN, MarkFinder, Marks
from .numbers import cell_number, writing_notes
from .part import Part, WrongCells
from .raw import Cell, WrongCell
from .tokens import MISSING, is_comma_number, is_padded, is_under_limit, missing_among, number_of

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
    marks
        Decimal mark and thousands separator of the numbers.
    under_limit
        For each feature that has some, the number of cells such as ``<5``, which count as missing.
    """

    values: np.ndarray
    levels: dict[str, tuple[str, ...]]
    notes: tuple[str, ...]
    marks: Marks = PLAIN
    under_limit: Mapping[str, int] = field(default_factory=dict)


def read_mixed(part: Part, decimal: str | None = None) -> MixedValues:
    """Return the chosen cells with every feature read as a number or as text.

    A feature is a number when all its cells that are not missing are; else text, whose levels are its
    different texts without blanks at their ends, sorted. A feature with text among more than ten different
    numbers is refused (``high`` in a column of readings); but ``<5`` there counts as missing. Decimal commas
    and thousands separators are read where all features of numbers agree on one writing. ``-`` is a missing
    cell unless ``+`` is a level of the same feature.

    Parameters
    ----------
    decimal
        ``.`` or ``,``; found when None.

    Raises
    ------
    InputError
        With place, feature and sample of five cells.
    """
    names, features = part.feature_names(), _by_feature(part)
    marks = _marks(part, features, decimal)
    wrong, levels, under = WrongCells(part), {}, _UnderLimit()
    values = np.empty((len(features[0]), len(features)))
    for position, cells in enumerate(features):
        numbers = [_reading(cell, marks) for cell in cells]
        misfits = under.taken_out(names[position], cells, numbers, _misfits(cells, numbers))
        for sample in misfits:
            wrong.add(*_position(part, position, sample), cells[sample])
        if not misfits and None in numbers:
            values[:, position], levels[names[position]] = _coded(cells)
        else:
            values[:, position] = [np.nan if number is None else number for number in numbers]
    if wrong.faults.total:
        raise wrong.error("no number, in a feature of numbers")
    notes = [
        *writing_notes(part, marks, under.counts, list(under.tokens)),
        *_level_notes(part, levels, len(values)),
    ]
    return MixedValues(values, levels, tuple(notes), marks, under.counts)


class _UnderLimit:
    """Counts the cells under a limit in features of readings."""

    def __init__(self) -> None:
        self.counts: dict[str, int] = {}
        self.tokens: dict[str, None] = {}

    def taken_out(
        self, name: str, cells: Sequence[Cell], numbers: list[float | None], misfits: Sequence[int]
    ) -> list[int]:
        """Make cells under a limit missing in ``numbers``, and return the misfits that are something else."""
        under = [k for k in misfits if isinstance(cells[k], str) and is_under_limit(str(cells[k]))]
        for k in under:
            numbers[k] = np.nan
            self.tokens[str(cells[k]).strip()] = None
        if under:
            self.counts[name] = len(under)
        return [k for k in misfits if k not in set(under)]


def _marks(part: Part, features: Sequence[Sequence[Cell]], decimal: str | None) -> Marks:
    """Return the writing that all features of numbers agree on; the plain one when they do not."""
    finder, found = MarkFinder(decimal), decimal == ","
    for cells in features:
        texts = [cell.strip() for cell in cells if isinstance(cell, str)]
        held = [text for text in texts if text not in MISSING and not is_under_limit(text)]
        if any(is_padded(text) or not _is_number_like(text) for text in held):
            continue
        found |= any(map(is_comma_number, held))
        finder.look(held)
    if not found:
        return PLAIN
    if finder.unclear:
        raise InputError(
            f"{part.raw.path}: numbers have commas or points that may be decimal marks or part thousands, and "
            "nothing in the table tells which; say decimal = ',' or decimal = '.' for this table"
        )
    return finder.marks() or PLAIN


def _is_number_like(text: str) -> bool:
    return number_of(text) is not None or is_comma_number(text)


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


def _reading(cell: Cell, marks: Marks) -> float | None:
    """Return a cell's number; codes such as ``007`` are text."""
    if isinstance(cell, str) and is_padded(cell):
        return None
    return cell_number(cell, marks)


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
