"""What the checks look at: the sample sheet and every block, as measured and as prepared."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from itertools import combinations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.errors import InputError
from workbench.settings import BlockSettings, Settings

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]
IndexArray = NDArray[np.intp]
Levels = tuple[tuple[str, ...] | None, ...]

SEED = 20260101


@dataclass(frozen=True, eq=False)
class CheckedBlock:
    """One block without the samples that the settings leave out; all rows are in the order of ``samples``.

    Attributes
    ----------
    name, layer, values : str
        ``values`` is the kind that is declared: ``counts``, ``intensities`` ...
    settings : BlockSettings
    samples, features : tuple of str
        Rows and columns of ``measured``.
    measured : ndarray of shape (n_samples, n_features)
        NaN where missing; text features as positions in ``levels``.
    columns : DataFrame
        Rows of the sample sheet, and what the run sheet says of each sample where it says one thing.
    adjust : tuple of str
        Nuisance columns of the study and of this block, each once.
    nuisance : ndarray of shape (n_samples, n_columns)
        Their numbers and indicators, without intercept; NaN rows for samples that lack a value.
    nuisance_names : tuple of str
        Name of each column of ``nuisance``: ``age`` or ``batch=b2``.
    group_codes : ndarray of int, shape (n_samples,)
        Position in ``group_levels``; -1 for a sample without a group, and for all where there are no groups.
    group_levels : tuple of str
    levels : tuple
        For every feature None (a number) or the names of its levels.
    prepared : ndarray of shape (n_samples, n_prepared) or None
        None while the block has not been prepared.
    prepared_features : tuple of str
    imputed : ndarray of bool, shape (n_samples, n_prepared), or None
    annotations : DataFrame
        Text, one row per feature.
    runs : DataFrame or None
        The run sheet, one row per run.
    run_values : ndarray of shape (n_runs, n_features) or None
        Measured values of every run, pools and blanks included.
    design_fault : str
        Why the nuisance columns could not be read; "" when they could.
    """

    name: str
    layer: str
    values: str
    settings: BlockSettings
    samples: tuple[str, ...]
    features: tuple[str, ...]
    measured: FloatArray
    columns: pd.DataFrame
    adjust: tuple[str, ...]
    nuisance: FloatArray
    nuisance_names: tuple[str, ...]
    group_codes: IndexArray
    group_levels: tuple[str, ...]
    levels: Levels
    prepared: FloatArray | None = None
    prepared_features: tuple[str, ...] = ()
    imputed: BoolArray | None = None
    annotations: pd.DataFrame = field(default_factory=pd.DataFrame)
    runs: pd.DataFrame | None = None
    run_values: FloatArray | None = None
    design_fault: str = ""

    def __post_init__(self) -> None:
        n, p = len(self.samples), len(self.features)
        _check_shape(self.name, "measured values", self.measured.shape, (n, p))
        _check_shape(self.name, "nuisance columns", self.nuisance.shape, (n, len(self.nuisance_names)))
        _check_shape(self.name, "groups", self.group_codes.shape, (n,))
        if self.prepared is not None:
            wanted = (n, len(self.prepared_features))
            _check_shape(self.name, "prepared values", self.prepared.shape, wanted)

    @cached_property
    def usable(self) -> IndexArray:
        """Rows of the samples whose group and nuisance columns all have values."""
        held = ~np.isnan(self.nuisance).any(axis=1)
        if self.group_levels:
            held &= self.group_codes >= 0
        return np.flatnonzero(held)

    @cached_property
    def group_columns(self) -> FloatArray:
        """Indicators of the groups but the first, shape (n_samples, levels - 1)."""
        others = np.arange(1, max(1, len(self.group_levels)))
        return np.asarray(self.group_codes[:, None] == others, dtype=np.float64)

    def design(self, with_group: bool = True) -> FloatArray:
        """Return nuisance (and group) columns of the ``usable`` rows, without intercept."""
        parts = [self.nuisance] + ([self.group_columns] if with_group else [])
        return np.hstack(parts)[self.usable]

    def take(self, rows: IndexArray) -> tuple[str, ...]:
        """Return the names of some samples."""
        return tuple(self.samples[row] for row in rows)


@dataclass(frozen=True, eq=False)
class StudyData:
    """A study as the checks see it.

    Attributes
    ----------
    settings : Settings
    sheet : DataFrame
        The whole sample sheet, indexed by sample id, samples left out included.
    blocks : dict of str to CheckedBlock
        In the order of the settings.
    spare_tables : mapping of str to DataFrame
        Further tables of text that lie in the project (file name -> cells), looked at for damaged names alone.
    seed : int
        Of all draws.
    """

    settings: Settings
    sheet: pd.DataFrame
    blocks: dict[str, CheckedBlock]
    spare_tables: Mapping[str, pd.DataFrame] = field(default_factory=dict)
    seed: int = SEED

    @property
    def excluded(self) -> dict[str, str]:
        """Samples that the whole study leaves out, with the reason."""
        return dict(self.settings.samples.exclude)

    @property
    def kept_sheet(self) -> pd.DataFrame:
        """Rows of the sample sheet without the samples that the study leaves out."""
        return self.sheet.loc[[sample for sample in self.sheet.index if str(sample) not in self.excluded]]

    @property
    def pairs(self) -> tuple[tuple[CheckedBlock, CheckedBlock], ...]:
        """Pairs of blocks of different layers, in the order of the blocks."""
        every = combinations(self.blocks.values(), 2)
        return tuple((one, other) for one, other in every if one.layer != other.layer)


def shared_rows(one: CheckedBlock, other: CheckedBlock) -> tuple[IndexArray, IndexArray]:
    """Return the rows, in both blocks, of the samples that both have with a complete design."""
    place = {other.samples[row]: row for row in other.usable}
    both = [(row, place[one.samples[row]]) for row in one.usable if one.samples[row] in place]
    rows = np.array(both, dtype=np.intp).reshape(-1, 2)
    return rows[:, 0], rows[:, 1]


def _check_shape(block: str, what: str, got: tuple[int, ...], wanted: tuple[int, ...]) -> None:
    if got != wanted:
        raise InputError(
            f"block '{block}': {what} of shape {got}, wanted {wanted}; give one row for each sample, in their order"
        )
