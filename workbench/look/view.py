"""What a look at a block is given: values before and after preparation, and what is known about its samples."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine.look.association import SampleColumn
from workbench.errors import InputError
from workbench.intake.kinds import column_kind, column_numbers, present

FloatArray = NDArray[np.float64]
Kind = Literal["classes", "number"]


@dataclass(frozen=True)
class Levels:
    """Classes of the samples: a name, the level of each sample (position, -1 none) and the levels in order."""

    name: str
    codes: tuple[int, ...]
    levels: tuple[str, ...]

    def members(self, level: int) -> NDArray[np.intp]:
        """Positions of the samples of one level."""
        return np.flatnonzero(np.array(self.codes) == level)


@dataclass(frozen=True, eq=False)
class BlockView:
    """One block as it is looked at.

    Attributes
    ----------
    name, layer, values : str
        Block name, biological kind, and what its delivered numbers are (``counts``, ``intensities``, ...).
    samples, features : tuple of str
        Names of the rows and columns of ``prepared``.
    prepared : ndarray of shape (n_samples, n_features)
        Prepared values, without gaps.
    imputed : ndarray of bool, shape (n_samples, n_features), or None
        Cells that preparation filled in; None: none.
    measured : ndarray of shape (n_samples, n_measured) or None
        Delivered values of the same samples, NaN where missing (zeros of intensities as well, where they
        mean missing). None: nothing is said about gaps and distributions before preparation.
    measured_features : tuple of str
        Names of its columns; left out when they are ``features``.
    columns : DataFrame
        What the sample sheet says about the samples, one row each, in their order.
    kinds : mapping of str to {"classes", "number"}
        How a column is read, where it could be either.
    groups : Levels or None
        The groups of the study (see :func:`levels_of`).
    adjust : tuple of str
        Columns that the study adjusts for.
    shape_by : str
        Column that shapes the marks of the score plot (subject or batch); "" for none.
    """

    name: str
    layer: str
    values: str
    samples: tuple[str, ...]
    features: tuple[str, ...]
    prepared: FloatArray
    columns: pd.DataFrame
    imputed: NDArray[np.bool_] | None = None
    measured: FloatArray | None = None
    measured_features: tuple[str, ...] = ()
    kinds: Mapping[str, Kind] = field(default_factory=dict)
    groups: Levels | None = None
    adjust: tuple[str, ...] = ()
    shape_by: str = ""

    def __post_init__(self) -> None:
        n = len(self.samples)
        self._check("prepared values", self.prepared.shape, (n, len(self.features)))
        self._check("rows of the sample sheet", (len(self.columns),), (n,))
        if self.imputed is not None:
            self._check("imputed cells", self.imputed.shape, self.prepared.shape)
        if self.measured is not None:
            self._check("measured values", self.measured.shape, (n, len(self.names_measured)))
        if self.groups is not None:
            self._check("groups", (len(self.groups.codes),), (n,))
        unknown = [name for name in (*self.adjust, self.shape_by) if name and name not in self.columns]
        if unknown:
            raise InputError(
                f"block '{self.name}': the sample sheet has no column {unknown[0]!r}; it has "
                + ", ".join(map(repr, self.columns.columns))
            )

    def _check(self, what: str, got: tuple[int, ...], wanted: tuple[int, ...]) -> None:
        if got != wanted:
            raise InputError(
                f"block '{self.name}': {what} of shape {got} for {len(self.samples)} samples and "
                f"{len(self.features)} features; they must be of shape {wanted}, in the samples' order"
            )

    @property
    def names_measured(self) -> tuple[str, ...]:
        """Names of the measured features."""
        return self.measured_features or self.features


def levels_of(name: str, labels: Sequence[object], order: Sequence[str] = ()) -> Levels:
    """Classes of the samples from their labels; ``None`` and "" are no class.

    Parameters
    ----------
    name : str
        What the classes are called, such as the column they come from.
    labels : sequence
        One per sample.
    order : sequence of str
        Levels in the wanted order; those that do not occur are left out, further ones follow sorted.

    Examples
    --------
    >>> levels_of("day", ["2", "1", "", "2"], order=["2"])
    Levels(name='day', codes=(0, 1, -1, 0), levels=('2', '1'))
    """
    text = ["" if label is None else str(label) for label in labels]
    found = set(text) - {""}
    levels = [level for level in order if level in found]
    levels += sorted(found - set(levels))
    place = {level: code for code, level in enumerate(levels)}
    return Levels(name, tuple(place.get(label, -1) for label in text), tuple(levels))


def sample_columns(view: BlockView) -> tuple[SampleColumn, ...]:
    """Columns of the sample sheet as the engine takes them: numbers, or positions of classes.

    A column that could be either is read as classes, which finds any difference between its values. Groups
    that are no column themselves (cells of several factors) come first.
    """
    columns = [
        _sample_column(str(name), view.columns[name], view.kinds.get(str(name))) for name in view.columns
    ]
    if view.groups is not None and view.groups.name not in view.columns:
        columns.insert(0, _of_levels(view.groups))
    return tuple(columns)


def _sample_column(name: str, cells: pd.Series, kind: Kind | None) -> SampleColumn:
    """Read one column by the kind that is stated, or else by its cells."""
    found = kind or column_kind(cells)
    numbers = column_numbers(cells) if found == "number" else None
    if numbers is not None:
        return SampleColumn(name, "number", numbers.to_numpy(dtype=np.float64))
    return _of_levels(column_levels(name, cells))


def _of_levels(levels: Levels) -> SampleColumn:
    codes = np.array(levels.codes, dtype=np.float64)
    return SampleColumn(levels.name, "classes", np.where(codes < 0, np.nan, codes), levels.levels)


def column_levels(name: str, cells: pd.Series) -> Levels:
    """Classes of a column of the sample sheet; missing tokens are no class."""
    held = present(cells).reindex(cells.index)
    return levels_of(name, [None if pd.isna(cell) else cell for cell in held])
