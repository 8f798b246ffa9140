"""What goes into a recipe, what comes out of it, and what passes from step to step."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from itertools import compress

import numpy as np
from numpy.typing import NDArray

from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.prepare.runs import Runs, RunTable
from workbench.prepare.words import some

__all__ = [
    "LARGEST",
    "Levels",
    "Mask",
    "Matrix",
    "MeasuredTable",
    "PreparedTable",
    "RunTable",
    "Runs",
    "StepAccount",
    "StepTable",
    "some",
]

Matrix = NDArray[np.float64]
Mask = NDArray[np.bool_]
LARGEST = 1e100
LARGEST_QUOTIENT = 1e300

Levels = tuple[tuple[str, ...] | None, ...]


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
    runs : RunTable, optional
        The assay's runs, where there is a run sheet: those of the samples (at least one each), pools and
        blanks. A recipe then works on the runs, and ``values`` is what they were combined to at delivery.

    Raises
    ------
    InputError
        When names and shape disagree, a name stands twice, or a value is infinite or beyond 1e100.
    """

    values: Matrix
    samples: tuple[str, ...]
    features: tuple[str, ...]
    levels: Levels | None = None
    runs: RunTable | None = None

    def __post_init__(self) -> None:
        _check_shape(self.values, self.samples, self.features)
        _check_unique(self.samples, "sample")
        _check_unique(self.features, "feature")
        if self.levels is not None and len(self.levels) != len(self.features):
            raise InputError(f"levels are given for {len(self.levels)} of {len(self.features)} features")
        _check_finite(self)
        if self.runs is not None:
            _check_runs(self.runs, self)

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
        """Return the table of some samples, in the order asked for; all pools and blanks stay."""
        names = tuple(self.samples[row] for row in rows)
        runs = None if self.runs is None else self.runs.for_samples(names)
        return replace(self, values=self.values[np.asarray(rows, dtype=np.intp)], samples=names, runs=runs)

    def run_rows(self) -> MeasuredTable:
        """Return the runs as rows of a table, pools and blanks among them; without a run sheet the table itself."""
        if self.runs is None:
            return self
        return MeasuredTable(self.runs.values, self.runs.runs, self.features, self.levels)


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
    cautions : tuple of str
        What a reader should know before trusting the result; empty when there is nothing.
    rule, why : str
        What the step does in general, and why.
    change : str
        The lines of ``[blocks.NAME.prepare]`` that change it, as they stand now; empty when none does.
    """

    step: str
    sentence: str
    numbers: dict[str, float | int | str] = field(default_factory=dict)
    dropped: dict[str, str] = field(default_factory=dict)
    reference: str = ""
    cautions: tuple[str, ...] = ()
    rule: str = ""
    why: str = ""
    change: str = ""


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
    scale : ndarray of shape (n_samples,)
        What was taken from each sample's logarithms: log2 of its size factor or dilution, the shift of its median.
    """

    values: Matrix
    imputed: Mask
    samples: tuple[str, ...]
    features: tuple[str, ...]
    account: tuple[StepAccount, ...]
    origins: tuple[str, ...]
    scale: Matrix

    @property
    def cautions(self) -> tuple[str, ...]:
        """What a reader should know before trusting the values, step by step."""
        return tuple(caution for step in self.account for caution in step.cautions)

    @property
    def dropped(self) -> dict[str, str]:
        """Every dropped feature with its reason."""
        return {feature: why for step in self.account for feature, why in step.dropped.items()}


@dataclass(frozen=True, eq=False)
class Delivered:
    """Pools and blanks as they came, with all features, and the places of those features that are left."""

    controls: RunTable
    places: NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class StepTable:
    """The table on its way through the steps; steps return a new one and never write into it.

    Before the runs of a sample are combined, the rows are runs of samples: ``samples`` holds the names of the
    runs, ``runs`` what is known of them, ``controls`` the pools and blanks, ``delivered`` these as they came.
    ``scale`` is what the steps so far have taken from each row's logarithms (log2 of its size factor or dilution,
    the shift of its median), shape (n_samples,); zero where nothing was.
    """

    values: Matrix
    imputed: Mask
    samples: tuple[str, ...]
    features: tuple[str, ...]
    origins: tuple[str, ...]
    levels: Levels
    scale: Matrix
    runs: Runs | None = None
    controls: RunTable | None = None
    delivered: Delivered | None = None

    @classmethod
    def of(cls, table: MeasuredTable) -> StepTable:
        """Return the start: measured values, nothing imputed; runs as rows where there are any."""
        rows: tuple[str, ...]
        if table.runs is None:
            runs, controls, rows, values = None, None, table.samples, table.values
        else:
            runs = table.runs.take(table.runs.rows_of(table.samples))
            controls = table.runs.take(table.runs.rows_as("pool", "blank"))
            rows, values = runs.runs, runs.values
        values = np.asarray(values, dtype=np.float64)
        imputed, scale = np.zeros(values.shape, dtype=bool), np.zeros(len(rows))
        names, levels = table.features, table.feature_levels
        came = None if controls is None else Delivered(controls, np.arange(len(names)))
        return cls(values, imputed, rows, names, names, levels, scale, runs, controls, came)

    @property
    def row_word(self) -> str:
        """What a row is, for sentences."""
        return "samples" if self.runs is None else "runs"

    def samples_with(self, cells: Mask) -> tuple[NDArray[np.int_], int]:
        """Return in how many samples each feature has a true cell (in any of the sample's runs), of how many."""
        if self.runs is None:
            return cells.sum(axis=0), len(self.samples)
        names = self.runs.sample
        starts = [row for row, name in enumerate(names) if row == 0 or name != names[row - 1]]
        by_sample = np.logical_or.reduceat(cells, starts, axis=0) if starts else cells
        return by_sample.sum(axis=0), len(starts)

    def with_values(self, values: Matrix) -> StepTable:
        """Return the table with other values in the same cells."""
        return replace(self, values=values)

    def divided(self, factors: Matrix) -> StepTable:
        """Return the table with each sample's values divided by its factor."""
        values = bounded_quotients(self.values, factors[:, None])
        return replace(self, values=values, scale=self.scale + np.log2(factors))

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
            controls=None if self.controls is None else self.controls.with_columns(mask),
            delivered=None
            if self.delivered is None
            else replace(self.delivered, places=self.delivered.places[mask]),
        )


def bounded_quotients(values: Matrix, divisors: Matrix) -> Matrix:
    """Return values over divisors; a quotient beyond all numbers is the largest one, a missing value stays missing.

    Examples
    --------
    >>> bounded_quotients(np.array([6.0, 1e100, np.nan]), np.array([2.0, 1e-300, 1.0])).tolist()
    [3.0, 1e+300, nan]
    """
    with np.errstate(over="ignore"):
        return np.minimum(values / divisors, LARGEST_QUOTIENT)


def _check_shape(
    values: Matrix, samples: tuple[str, ...], features: tuple[str, ...], row: str = "sample"
) -> None:
    expected = (len(samples), len(features))
    if np.shape(values) != expected:
        raise InputError(
            f"the values have shape {np.shape(values)}, the names say {expected[0]} {row}s x "
            f"{expected[1]} features; give one row per {row} and one column per feature"
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
            f"{counted(int(beyond.sum()), 'value is', 'values are')} infinite or beyond {LARGEST:g}, the first at "
            f"{table.first_cell(beyond)}; "
            "leave the cell empty where nothing was measured"
        )


def _check_runs(runs: RunTable, table: MeasuredTable) -> None:
    _check_shape(runs.values, runs.runs, table.features, "run")
    lacking = sorted(set(table.samples) - set(runs.sample))
    if lacking:
        raise InputError(
            f"{len(lacking)} of {len(table.samples)} samples have no run: {some(lacking)}; add their runs to the "
            "run sheet, or leave the samples out"
        )
    _check_finite(MeasuredTable(runs.values, runs.runs, table.features, table.levels))
