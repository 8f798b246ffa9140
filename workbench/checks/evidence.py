"""What findings rest on, as small records that figures are drawn from."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class SampleValues:
    """One figure per sample, and which samples stand out.

    Attributes
    ----------
    samples : tuple of str
    values : ndarray of shape (n_samples,)
    label : str
        What the values are.
    flagged : tuple of int
        Positions of the samples that the finding is about.
    limit : float
        What they passed; NaN for none.
    log_scale : bool
        Whether ratios count: the axis is logarithmic.
    """

    samples: tuple[str, ...]
    values: FloatArray
    label: str
    flagged: tuple[int, ...]
    limit: float = float("nan")
    log_scale: bool = False


@dataclass(frozen=True, eq=False)
class SamplePlane:
    """Samples on two components, and which of them stand out."""

    samples: tuple[str, ...]
    x: FloatArray
    y: FloatArray
    labels: tuple[str, str]
    flagged: tuple[int, ...]


@dataclass(frozen=True, eq=False)
class ScoresByColumn:
    """Scores of a component against a column of the sample sheet.

    Attributes
    ----------
    column : str
    scores : ndarray of shape (n_samples,)
    places : ndarray of shape (n_samples,)
        The column's number, or the position of its class in ``levels``.
    levels : tuple of str
        Empty for a number.
    label : str
        What the scores are.
    """

    column: str
    scores: FloatArray
    places: FloatArray
    levels: tuple[str, ...]
    label: str


@dataclass(frozen=True, eq=False)
class CrossTable:
    """How many samples each two levels of two columns have in common, ``counts`` (rows, columns)."""

    row_name: str
    rows: tuple[str, ...]
    column_name: str
    columns: tuple[str, ...]
    counts: NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class TwoSamples:
    """The features of two samples side by side."""

    names: tuple[str, str]
    x: FloatArray
    y: FloatArray
    label: str


@dataclass(frozen=True, eq=False)
class ValueSpread:
    """Measured values of a block as they are, ``values`` a part of them, and what they were declared as."""

    values: FloatArray
    declared: str
    label: str


@dataclass(frozen=True, eq=False)
class GapShares:
    """Missing share of features, ``shares`` (n_features, n_levels), by the level of a column."""

    column: str
    levels: tuple[str, ...]
    features: tuple[str, ...]
    shares: FloatArray


@dataclass(frozen=True, eq=False)
class RunFigures:
    """One figure per run over the injection order.

    Attributes
    ----------
    order : ndarray of shape (n_runs,)
    values : ndarray of shape (n_runs,)
    roles : tuple of str
        ``sample``, ``pool`` or ``blank``.
    label : str
    """

    order: FloatArray
    values: FloatArray
    roles: tuple[str, ...]
    label: str


@dataclass(frozen=True, eq=False)
class FeatureShares:
    """One figure per feature and a limit, drawn as a histogram."""

    values: FloatArray
    limit: float
    label: str
