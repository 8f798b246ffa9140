"""Reading the sample sheet: one row per biological sample, ids and levels as text."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from workbench.errors import InputError

from .columns import read_columns
from .faults import Faults, counted, listed, shown
from .ids import check_present, check_unique, id_notes, refuse_broken
from .kinds import column_kind, present
from .marks import PLAIN, MarkFinder, Marks
from .raw import Cell, RawTable, WrongCell, cell_text
from .suggest import Suggestions, suggest_columns
from .tokens import is_comma_number, is_padded, number_of

__all__ = ["SampleSheet", "Suggestions", "column_kind", "read_sample_sheet", "suggest_columns"]

_ID_NAMES = ("sample", "sample_id", "sampleid", "sample id", "sample_name", "samplename", "sample name")


@dataclass(frozen=True)
class SampleSheet:
    """A sample sheet.

    Attributes
    ----------
    frame
        DataFrame indexed by sample id (text; the index has the name of the id column), a column of text for
        each other column of the file, NaN where a cell is missing.
    notes
        What was accepted knowingly, one sentence each.
    """

    frame: pd.DataFrame
    notes: tuple[str, ...]


def read_sample_sheet(
    path: str | Path, *, id_column: str | None = None, sheet: str | None = None
) -> SampleSheet:
    """Return the sample sheet of a TSV, CSV or XLSX file.

    Ids stay as they are written. Other cells lose blanks at their ends (told); cells that are empty, ``NA``,
    ``NaN``, ``nan``, ``N/A``, ``#N/A``, ``null`` or ``NULL`` are missing, ``-`` and ``.`` in columns of
    numbers only. Numbers with decimal commas or thousands separators are written plainly (told) where all cells
    of the column agree on one reading; else the column stays text (told).

    Parameters
    ----------
    path
        The file.
    id_column
        Column with the sample ids; by default the first that is called ``sample``, ``sample_id`` or alike,
        else the first one.
    sheet
        Sheet of a workbook; needed when several hold cells.

    Raises
    ------
    InputError
        For ragged lines, columns without a name or with the same name, empty and repeated ids, with file,
        line and column.
    """
    path = Path(path)
    found = read_columns(path, "sample sheet", ("sample", "row", "row_name"), sheet)
    raw, names, columns = found.raw, found.names, found.columns
    position = _id_position(path, names, id_column)
    if position == 0:
        refuse_broken(raw, "sample")
    ids = list(raw.rows) if position == 0 else _ids(raw, columns[position], position, names[position])
    check_present(path, ids, "row", lambda i: raw.place(i, position - 1))
    _check_unique_ids(raw, ids, names, columns, position)
    notes = [*raw.notes]
    if id_column is None:
        notes.append(f"{path.name}: sample ids taken from column {shown(names[position])}")
    notes += [f"{path.name}: {note}" for note in id_notes(ids, "sample")]
    frame = _frame(raw, names, columns, position, ids, notes)
    return SampleSheet(frame, tuple(notes))


def _id_position(path: Path, names: Sequence[str], id_column: str | None) -> int:
    if id_column is None:
        return next(
            (j for j, name in enumerate(names) if name.lstrip("#").strip().casefold() in _ID_NAMES), 0
        )
    if id_column not in names:
        raise InputError(
            f"{path}: there is no column {shown(id_column)} for the sample ids; the columns are "
            f"{listed(names)}"
        )
    return list(names).index(id_column)


def _ids(raw: RawTable, cells: Sequence[Cell], position: int, name: str) -> list[str]:
    for i, cell in enumerate(cells):
        if isinstance(cell, WrongCell):
            raise InputError(
                f"{raw.path}: {raw.place(i, position - 1)} (column {shown(name)}) holds {cell} in place of "
                "a sample id; set the column to the text format and type the ids again"
            )
    return [cell_text(cell) for cell in cells]


def _check_unique_ids(
    raw: RawTable, ids: Sequence[str], names: Sequence[str], columns: Sequence[Sequence[Cell]], position: int
) -> None:
    try:
        check_unique(raw.path, ids, "sample", lambda i: raw.place(i, position - 1))
    except InputError as error:
        unique = [
            n for n, cells in zip(names, columns, strict=True) if len(set(map(str, cells))) == len(cells)
        ]
        hint = f"; columns without repeated values: {listed(unique)}" if unique else ""
        raise InputError(f"{error} (ids were taken from column {shown(names[position])}{hint})") from None


def _frame(
    raw: RawTable,
    names: Sequence[str],
    columns: Sequence[Sequence[Cell]],
    position: int,
    ids: Sequence[str],
    notes: list[str],
) -> pd.DataFrame:
    index = pd.Index(list(ids), dtype="object", name=names[position])
    data = {}
    for j, (name, cells) in enumerate(zip(names, columns, strict=True)):
        if j == position:
            continue
        _refuse_broken(raw, cells, j, name, ids)
        written = pd.Series([None if c is None else cell_text(c) for c in cells], index=index, dtype=object)
        data[name] = present(written).astype(object).reindex(index)
        plain = _plainly_written(data[name])
        if plain is not None:
            notes.append(f"{raw.path.name}: column {shown(name)} {_rewritten(data[name], plain)}")
            data[name] = plain
        notes += _column_notes(raw.path.name, name, written, data[name])
    return pd.DataFrame(data, index=index)


def _marks_of(column: pd.Series) -> Marks:
    """Return how the numbers of a column are written; plainly, where they are not all numbers or disagree."""
    cells = list(dict.fromkeys(column.dropna()))
    if not any(map(is_comma_number, cells)):
        return PLAIN
    if any(is_padded(cell) or not (is_comma_number(cell) or number_of(cell) is not None) for cell in cells):
        return PLAIN
    finder = MarkFinder()
    finder.look(cells)
    return finder.marks() or PLAIN


def _plainly_written(column: pd.Series) -> pd.Series | None:
    """Return a column with its numbers as ``1234.5``; None when they are so already, or cannot be read for sure."""
    marks = _marks_of(column)
    if marks.plain:
        return None
    numbers = {cell: marks.number(cell) for cell in column.dropna()}
    plain = {cell: f"{number:.15g}" for cell, number in numbers.items() if number is not None}
    return column.map(plain).astype(object) if len(plain) == len(numbers) else None


def _rewritten(written: pd.Series, plain: pd.Series) -> str:
    first = next(sample for sample in written.index if is_comma_number(str(written[sample])))
    told = _marks_of(written).told()
    return f"has {told}, as all its numbers agree: {shown(written[first])} is read as {plain[first]}"


def _refuse_broken(raw: RawTable, cells: Sequence[Cell], j: int, name: str, ids: Sequence[str]) -> None:
    faults = Faults(raw.path)
    ways: dict[str, None] = {}
    for i, cell in enumerate(cells):
        if isinstance(cell, WrongCell) and cell.kind in ("error", "formula"):
            faults.add(f"{raw.place(i, j - 1)} (column {shown(name)}, sample {shown(ids[i])}) holds {cell}")
            ways[cell.way_out] = None
    if faults.total:
        raise faults.error(f"{counted(faults.total, 'cell has', 'cells have')} no value", "; ".join(ways))


def _column_notes(file: str, name: str, written: pd.Series, read: pd.Series) -> list[str]:
    notes = []
    trimmed = int((written.dropna() != written.dropna().str.strip()).sum())
    if trimmed:
        notes.append(
            f"{file}: blanks at the ends of {counted(trimmed, 'cell')} of column {shown(name)} left out"
        )
    notes += [f"{file}: column {shown(name)} {fault}" for fault in _nearly_numbers(read)]
    forms: dict[str, list[str]] = {}
    for level in dict.fromkeys(read.dropna()):
        forms.setdefault(level.casefold(), []).append(level)
    for levels in forms.values():
        if len(levels) > 1:
            notes.append(
                f"{file}: column {shown(name)} has levels that differ in case alone: {listed(levels)}; "
                "they count as different"
            )
    return notes


def _nearly_numbers(column: pd.Series) -> list[str]:
    """Return what keeps a column from being one of numbers, where most of its cells are numbers."""
    cells = column.dropna()
    words = [cell for cell in cells if number_of(cell) is None]
    commas = [cell for cell in words if is_comma_number(cell)]
    if not words or 2 * (len(words) - len(commas)) >= len(cells):
        return []
    what = "decimal commas or thousands separators" if commas else "text among its numbers"
    return [f"has {what} ({listed(list(dict.fromkeys(commas or words)), 3)}), so it counts as classes"]
