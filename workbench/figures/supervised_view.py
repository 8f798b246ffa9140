"""What the figures of a supervised analysis show, in plain arrays."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class SupervisedView:
    """A supervised analysis as its figures need it.

    Attributes
    ----------
    outcome : str
    levels : tuple of str
        Classes in order; empty for a number.
    truth : ndarray of shape (n_units,)
        Class from 0, or number.
    fitted, held_out : ndarray of shape (n_units, n_columns)
        Score of the fit and of models that had not seen the unit: one column for a number or two classes, else
        one for each class. NaN where not scored.
    roc_scores : ndarray of shape (repeats, n_units, n_columns)
        Held-out scores, repeat by repeat.
    blocks : tuple of str
    alike : {"features", "blocks"}
        What counts alike in the fit.
    importance : ndarray of shape (n_components, n_blocks)
    measure : str
        Name of the held-out figure.
    candidates : tuple of int
    by_components : ndarray of shape (repeats, n_candidates)
        Held-out figure with each number of components.
    in_sample : ndarray of shape (n_candidates,)
        Share of the outcome explained in sample; NaN where there are fewer components.
    chosen : int
    names, name_blocks : tuple of str
        Features drawn, the most important first, and their blocks.
    vip, frequency : ndarray of shape (n_names,)
        ``frequency``: share of the training parts' panels; NaN without a panel.
    in_panel : ndarray of bool, shape (n_names,)
    observed : float
    null : ndarray of shape (permutations,)
    p : float or None
    withheld : str or None
    """

    outcome: str
    levels: tuple[str, ...]
    truth: FloatArray
    fitted: FloatArray
    held_out: FloatArray
    roc_scores: FloatArray
    blocks: tuple[str, ...]
    alike: str
    importance: FloatArray
    measure: str
    candidates: tuple[int, ...]
    by_components: FloatArray
    in_sample: FloatArray
    chosen: int
    names: tuple[str, ...]
    name_blocks: tuple[str, ...]
    vip: FloatArray
    frequency: FloatArray
    in_panel: NDArray[np.bool_]
    observed: float
    null: FloatArray
    p: float | None
    withheld: str | None

    @property
    def columns(self) -> int:
        """Columns of a score."""
        return int(self.held_out.shape[1])
