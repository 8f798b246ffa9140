"""What goes into a recipe, what comes out of it, and what passes from step to step."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from itertools import compress

import numpy as np
from numpy.typing import NDArray

from workbench.errors import InputError

Matrix = NDArray[np.float64]
Mask = NDArray[np.bool_]
LARGEST = 1e100

Levels = tuple[tuple[str, ...] | None, ...]


def some(names: Sequence[str], limit: int = 3) -> str:
    """Return the first few names, quoted, for a message.

    >>> some(["S1", "S2", "S3", "S4"])
    "'S1', 'S2', 'S3' and 1 more"
    """
    shown = ", ".join(f"'{name}'" for name in names[:limit])
    more = len(names) - limit
    return f"{shown} and {more} more" if more > 0 else shown


@dataclass(frozen=True, eq=False)
class MeasuredTable:
    """Measured values of one block.

    Attributes
    ----------
    values : ndarray of shape (n_samples, n_features)
        Numbers as delivered, NaN where missing; for text features of ``mixed`` values the
        position of the cell's level in ``levels``.
    samples, features : tuple of str
        Names of the rows and of the columns, each name once.
    levels : tuple, optional
        For every feature None (a number) or the names of its levels. None: all are numbers.

    Raises
    ------
    InputError
        When names and shape disagree, a name stands twice, or a value is infinite or beyond 1e100.
    """

    values: Matrix
    samples: tuple[str, ...]
    features: tuple[str, ...]
    levels: Levels | None = None

    def __post_init__(self) -> None:
        _check_shape(self.values, self.samples, self.features)
        _check_unique(self.samples, "sample")
        _check_unique(self.features, "feature")
        if self.levels is not None and len(self.levels) != len(self.features):
            raise InputError(f"levels are given for {len(self.levels)} of {len(self.features)} features")
        _check_finite(self)

    @property
    def feature_levels(self) -> Levels:
        """Levels of every feature, None for numbers."""
        return (None,) * len(self.features) if self.levels is None else self.levels

    def first_cell(self, where: Mask) -> str:
        """Return the first cell of a mask in words, for messages."""
        row, column = np.argwhere(where)[0]
        value = self.values[row, column]
        return f"feature '{self.features[column]}', sample '{self.samples[row]}': {value:g}"

    def take(self, rows: Sequence[int] | NDArray[np.intp]) -> MeasuredTable:
        """Return the table of some samples, in the order asked for."""
        names = tuple(self.samples[row] for row in rows)
        return replace(self, values=self.values[np.asarray(rows, dtype=np.intp)], samples=names)


@dataclass(frozen=True)
class StepAccount:
    """What one step did, in a sentence and in numbers.

    Attributes
    ----------
    step : str
        Name of the step.
    sentence : str
        What was done and by which rule, in one sentence.
    numbers : dict
        The figures of the sentence and others worth keeping; plain Python values.
    dropped : dict
        Feature -> reason, for features that end with this step.
    reference : str
        The paper that the method comes from; empty when there is none.
    """

    step: str
    sentence: str
    numbers: dict[str, float | int | str] = field(default_factory=dict)
    dropped: dict[str, str] = field(default_factory=dict)
    reference: str = ""


@dataclass(frozen=True, eq=False)
class PreparedTable:
    """Values fit for linear methods.

    Attributes
    ----------
    values : ndarray of shape (n_samples, n_features)
        Prepared values, no gaps.
    imputed : bool ndarray of shape (n_samples, n_features)
        True where the value was filled in, not measured.
    samples, features : tuple of str
        Names of the rows and of the columns.
    account : tuple of StepAccount
        One entry per step, in order.
    origins : tuple of str
        For every column the measured feature that it comes from (another name than the column's
        own for ``column=level`` indicators).
    """

    values: Matrix
    imputed: Mask
    samples: tuple[str, ...]
    features: tuple[str, ...]
    account: tuple[StepAccount, ...]
    origins: tuple[str, ...]

    @property
    def dropped(self) -> dict[str, str]:
        """Every dropped feature with its reason."""
        return {feature: why for step in self.account for feature, why in step.dropped.items()}


@dataclass(frozen=True, eq=False)
class StepTable:
    """The table on its way through the steps; steps return a new one and never write into it.

    ``scale`` is what the steps so far have taken from each sample's logarithms (log2 of its size factor or
    dilution, the shift of its median), shape (n_samples,); zero where nothing was.
    """

    values: Matrix
    imputed: Mask
    samples: tuple[str, ...]
    features: tuple[str, ...]
    origins: tuple[str, ...]
    levels: Levels
    scale: Matrix

    @classmethod
    def of(cls, table: MeasuredTable) -> StepTable:
        """Return the start: measured values, nothing imputed."""
        values = np.asarray(table.values, dtype=np.float64)
        imputed = np.zeros(values.shape, dtype=bool)
        names, scale = table.features, np.zeros(len(table.samples))
        return cls(values, imputed, table.samples, names, names, table.feature_levels, scale)

    def with_values(self, values: Matrix) -> StepTable:
        """Return the table with other values in the same cells."""
        return replace(self, values=values)

    def divided(self, factors: Matrix) -> StepTable:
        """Return the table with each sample's values divided by its factor."""
        return replace(self, values=self.values / factors[:, None], scale=self.scale + np.log2(factors))

    def shifted(self, shifts: Matrix) -> StepTable:
        """Return the table with each sample's shift taken from its logarithms."""
        return replace(self, values=self.values - shifts[:, None], scale=self.scale + shifts)

    def keep(self, mask: Mask) -> StepTable:
        """Return the table of the features where ``mask`` is true."""
        if mask.all():
            return self
        return replace(
            self,
            values=self.values[:, mask],
            imputed=self.imputed[:, mask],
            features=tuple(compress(self.features, mask)),
            origins=tuple(compress(self.origins, mask)),
            levels=tuple(compress(self.levels, mask)),
        )


def _check_shape(values: Matrix, samples: tuple[str, ...], features: tuple[str, ...]) -> None:
    expected = (len(samples), len(features))
    if np.shape(values) != expected:
        raise InputError(
            f"the values have shape {np.shape(values)}, the names say {expected[0]} samples x "
            f"{expected[1]} features; give one row per sample and one column per feature"
        )


def _check_unique(names: tuple[str, ...], what: str) -> None:
    if len(set(names)) < len(names):
        seen: set[str] = set()
        twice = [name for name in names if name in seen or seen.add(name)]  # type: ignore[func-returns-value]
        raise InputError(f"{what} names stand more than once: {some(twice)}; every {what} needs its own name")


def _check_finite(table: MeasuredTable) -> None:
    beyond = (table.values > LARGEST) | (table.values < -LARGEST)
    if beyond.any():
        raise InputError(
            f"{int(beyond.sum())} values are infinite or beyond {LARGEST:g}, the first at {table.first_cell(beyond)}; "
            "leave the cell empty where nothing was measured"
        )
