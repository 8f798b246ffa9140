"""A block seen through a linear map of its samples, slice by slice, as a screen takes it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine.far_values import FEWEST, HEAVY, excess_kurtosis, withstand
from workbench.engine.nuisance import CONSTANT_TOLERANCE
from workbench.engine.pairs.unit_rows import Columns
from workbench.engine.subjects import SubjectDesign, centred

FloatArray = NDArray[np.float64]
Ranks = Literal["no", "before", "after"]


@dataclass(frozen=True, eq=False)
class MappedBlock:
    """A block after ``room @ withstand(matrix @ values)``; offers shape and slices of columns.

    Attributes
    ----------
    source : array or HDF5 dataset of shape (n_samples, n_features)
    design : SubjectDesign
        Of the samples.
    matrix : ndarray of shape (n_contrasts, n_samples)
    ranks : {"no", "before", "after"}
        Whether deviations from the subject's mean are replaced by their ranks, or the mapped rows.
    room : ndarray of shape (n_rows, n_contrasts) or None
        A rotation that makes room for an intercept; None leaves the rows as they are.
    freedom : int
        Degrees of freedom of the mapped features, for their tails to be judged; 0 leaves them alone.
    steady : ndarray of shape (n_contrasts,) or None
        What ``matrix`` multiplies each contrast by, less than 1 for those of odd subjects; None for nothing.
    """

    source: Columns
    design: SubjectDesign
    matrix: FloatArray
    ranks: Ranks = "no"
    room: FloatArray | None = None
    freedom: int = 0
    steady: FloatArray | None = None

    @property
    def shape(self) -> tuple[int, ...]:
        """Rows and features."""
        rows = self.matrix if self.room is None else self.room
        return (rows.shape[0], int(self.source.shape[1]))

    def heavy(self) -> NDArray[np.bool_]:
        """Which features come back as normal scores for their heavy tails."""
        if self.freedom < FEWEST:
            return np.zeros(self.shape[1], dtype=np.bool_)
        marked: NDArray[np.bool_] = excess_kurtosis(replace(self, freedom=0, room=None)[:, :]) > HEAVY
        return marked

    def __getitem__(self, key: Any) -> FloatArray:
        """All rows of some features; a feature with a gap comes back without a number."""
        values = np.asarray(self.source[key], dtype=np.float64)
        with np.errstate(invalid="ignore", over="ignore"):
            if self.ranks == "before":
                values = rankdata(centred(self.design, values), axis=0)
            rows: FloatArray = self.matrix @ values
            gone = np.abs(rows).max(axis=0) <= CONSTANT_TOLERANCE * np.abs(values).max(axis=0)
            rows[:, gone] = 0.0
            if self.freedom:
                rows = withstand(rows, self.freedom)
            if self.room is not None:
                rows = self.room @ rows
        return np.asarray(rankdata(rows, axis=0), dtype=np.float64) if self.ranks == "after" else rows
