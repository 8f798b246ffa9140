"""Columns of the sample sheet that the settings do not use, read as classes or as numbers."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.checks.data import CheckedBlock, StudyData
from workbench.intake.kinds import column_kind, column_numbers, present
from workbench.intake.suggest import suggest_columns

FloatArray = NDArray[np.float64]

_ISO_DAY = re.compile(r"\d{4}-\d{2}-\d{2}([T ].*)?")
RUN_COLUMNS = ("order", "batch")
SAMPLES_PER_CLASS = 2.0
MANY_NUMBERS = 10


@dataclass(frozen=True, eq=False)
class SheetColumn:
    """One column of the sample sheet.

    Attributes
    ----------
    name : str
    technical : bool
        Its name is that of a batch, a run, a day, an order; not of a property of the samples.
    numbers : ndarray of shape (n_samples,) or None
        None for classes; NaN where missing.
    codes : ndarray of int, shape (n_samples,)
        Position in ``levels``, -1 where missing.
    levels : tuple of str
        Empty for a number.
    """

    name: str
    technical: bool
    numbers: FloatArray | None
    codes: NDArray[np.intp]
    levels: tuple[str, ...]

    @property
    def held(self) -> NDArray[np.bool_]:
        """Samples that have a value."""
        return ~np.isnan(self.numbers) if self.numbers is not None else self.codes >= 0

    @property
    def places(self) -> FloatArray:
        """Number of each sample, or position of its class; NaN where missing."""
        if self.numbers is not None:
            return self.numbers
        return np.where(self.codes < 0, np.nan, self.codes.astype(np.float64))

    def indicators(self, rows: NDArray[np.bool_]) -> FloatArray:
        """Return the column of some samples as a line and a bend, or as one 0/1 column for each class but one."""
        if self.numbers is not None:
            line = _standard(self.numbers[rows])
            bend = np.unique(line).size > MANY_NUMBERS and self.technical
            return np.column_stack([line, line**2]) if bend else line[:, None]
        used = np.unique(self.codes[rows])
        return np.asarray(self.codes[rows][:, None] == used[1:], dtype=np.float64)


def _standard(values: FloatArray) -> FloatArray:
    spread = float(values.std())
    centred: FloatArray = values - values.mean()
    return centred / spread if spread > 0.0 else centred


def unused_columns(data: StudyData, block: CheckedBlock) -> Iterator[SheetColumn]:
    """Yield the columns that the settings name neither as group, subject, nuisance of this block nor as id.

    Left out are columns with one value, and classes of fewer than two samples on average.
    """
    samples = data.settings.samples
    outcomes = {one.outcome for one in data.settings.analyses.values()}
    used = {samples.id, samples.subject, samples.time, *outcomes, *samples.group, *block.adjust}
    for name in map(str, block.columns.columns):
        if name not in used:
            column = read_column(name, block.columns[name], samples.kinds.get(name))
            if column is not None:
                yield column


def read_column(name: str, cells: pd.Series, kind: str | None = None) -> SheetColumn | None:
    """Return a column as numbers or classes, or None when it can tell samples apart into no groups.

    Days written as year-month-day are numbers when they are too many for classes. A column that may be
    either is read as classes.
    """
    technical = name in RUN_COLUMNS or name in suggest_columns(cells.to_frame(name)).adjust or _order(name)
    numbers = column_numbers(cells)
    found = kind or column_kind(cells)
    text = present(cells)
    if numbers is None and _many_classes(text):
        numbers, found = _days(cells, text), "number"
    if found == "number" and numbers is not None:
        values = numbers.to_numpy(dtype=np.float64)
        different = np.unique(values[~np.isnan(values)]).size
        return SheetColumn(name, technical, values, np.empty(0, np.intp), ()) if different > 1 else None
    if _many_classes(text):
        return None
    levels = tuple(sorted(set(text)))
    place = {level: code for code, level in enumerate(levels)}
    codes = np.array([place.get(cell, -1) for cell in text.reindex(cells.index)], dtype=np.intp)
    return SheetColumn(name, technical, None, codes, levels) if len(levels) > 1 else None


def _order(name: str) -> bool:
    words = re.split(r"[^a-z]+", name.casefold())
    return bool({"order", "injection", "position", "run", "well"} & set(words))


def _many_classes(text: pd.Series) -> bool:
    return len(text) < SAMPLES_PER_CLASS * text.nunique()


def _days(cells: pd.Series, text: pd.Series) -> pd.Series | None:
    if text.empty or not all(_ISO_DAY.fullmatch(cell) for cell in text):
        return None
    days = pd.to_datetime(text.str.slice(0, 10), errors="coerce", format="%Y-%m-%d")
    if days.isna().any():
        return None
    return pd.Series((days - days.min()).dt.days.astype(float), index=text.index).reindex(cells.index)
