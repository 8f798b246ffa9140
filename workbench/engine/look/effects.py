"""Differences between groups of samples, for every feature, fitted together with the nuisance."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from workbench.engine.multiple import benjamini_hochberg
from workbench.engine.nuisance import CONSTANT_TOLERANCE, Nuisance, check_finite
from workbench.engine.tails import SMALLEST_P
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class GroupEffects:
    """Group effect of every feature; arrays of shape (n_features,), NaN where a feature cannot be tested.

    Attributes
    ----------
    effect : ndarray
        Largest difference to the reference (level minus reference, in size), in the feature's own unit.
    p : ndarray
        Two-sided p of t with two levels, p of F (any difference at all) with more; never under 2.2e-308.
    q : ndarray
        Benjamini-Hochberg over the features tested.
    level : ndarray of int
        Code of the level that ``effect`` belongs to; -1 where a feature cannot be tested.
    df : int
        Residual degrees of freedom.
    tested : int
        Number of features tested.
    """

    effect: FloatArray
    p: FloatArray
    q: FloatArray
    level: NDArray[np.intp]
    df: int
    tested: int


def group_effects(
    x: FloatArray,
    group_codes: NDArray[np.integer],
    nuisance: FloatArray | Nuisance | None = None,
    reference: int = 0,
) -> GroupEffects:
    """Differences of each feature between groups, fitted jointly with the nuisance by least squares.

    ``x = intercept + nuisance + group + error``; what group and nuisance share is credited to neither.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
        A feature with a gap, or without residual variance before the group is fitted, is not tested.
    group_codes : ndarray of int, shape (n_samples,)
        Level of each sample, 0 and up. Levels that no sample has are allowed.
    nuisance : ndarray of shape (n_samples, n_columns), Nuisance, optional
        Besides the intercept.
    reference : int
        Code of the level that the others are compared with.

    Raises
    ------
    NumericsError
        When codes do not fit, fewer than two levels are there, a level is in the span of the nuisance, or no
        degree of freedom is left.

    Examples
    --------
    >>> x = np.array([[1.0], [2.0], [4.0], [5.0]])
    >>> effects = group_effects(x, np.array([0, 0, 1, 1]))
    >>> effects.effect, effects.p.round(6), effects.df
    (array([3.]), array([0.051317]), 2)
    """
    x = np.asarray(x, dtype=np.float64)
    codes, levels = _check_codes(group_codes, x, reference)
    removed = nuisance if isinstance(nuisance, Nuisance) else Nuisance.of(nuisance, x.shape[0])
    indicators = (codes[:, None] == levels).astype(np.float64)
    design = _check_design(indicators, removed, levels)
    df = x.shape[0] - removed.rank - levels.size
    if df < 1:
        raise NumericsError(
            f"{x.shape[0]} samples, a nuisance of {removed.rank} dimensions (with intercept) and "
            f"{levels.size + 1} groups leave no degree of freedom; remove fewer columns, or add samples"
        )
    tested, residual = _residuals(x, removed)
    differences = np.linalg.lstsq(design, residual, rcond=None)[0]
    unexplained = np.square(residual - design @ differences).sum(axis=0)
    explained = np.square(design @ differences).sum(axis=0)
    largest = np.argmax(np.abs(differences), axis=0)
    effect, p = np.full(x.shape[1], np.nan), np.full(x.shape[1], np.nan)
    level = np.full(x.shape[1], -1, dtype=np.intp)
    effect[tested] = differences[largest, np.arange(largest.size)]
    level[tested] = levels[largest]
    p[tested] = _f_tail(explained / levels.size, unexplained / df, levels.size, df)
    return GroupEffects(effect, p, benjamini_hochberg(p), level, df, int(tested.sum()))


def _check_codes(
    group_codes: NDArray[np.integer], x: FloatArray, reference: int
) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Codes, and the levels other than the reference that samples have."""
    codes = np.asarray(group_codes)
    if x.ndim != 2 or codes.shape != x.shape[:1]:
        raise NumericsError(
            f"{codes.size} group codes for a block of shape {x.shape}; give one code for each sample"
        )
    if not np.issubdtype(codes.dtype, np.integer) or codes.min(initial=0) < 0:
        raise NumericsError("group codes must be whole numbers from 0 up; leave samples without a group out")
    levels = np.unique(codes).astype(np.intp)
    if reference not in levels:
        raise NumericsError(f"no sample is in the reference group {reference}; groups: {levels.tolist()}")
    if levels.size < 2:
        raise NumericsError(f"all samples are in group {reference}; at least two groups are needed")
    return codes.astype(np.intp), levels[levels != reference]


def _check_design(indicators: FloatArray, nuisance: Nuisance, levels: NDArray[np.intp]) -> FloatArray:
    """Remove the nuisance from the indicators, which must be distinguishable from it and from each other."""
    together = Nuisance.of(np.hstack([nuisance.basis[:, 1:], indicators]), indicators.shape[0])
    missing = np.setdiff1d(np.arange(levels.size), together.kept - (nuisance.rank - 1))
    if missing.size:
        raise NumericsError(
            f"group {levels[missing[0]]} cannot be told from the nuisance and the other groups: its difference "
            "to the reference is a combination of nuisance columns; remove one of these columns"
        )
    return nuisance.residuals(indicators)


def _residuals(x: FloatArray, nuisance: Nuisance) -> tuple[NDArray[np.bool_], FloatArray]:
    """Which features can be tested, and those features with the nuisance removed."""
    whole = np.isfinite(x).all(axis=0)
    residual = np.zeros_like(x)
    if whole.any():
        residual[:, whole] = nuisance.residuals(check_finite(x[:, whole], "the block"))
    longest = CONSTANT_TOLERANCE * np.linalg.norm(np.where(whole, x, 0.0), axis=0)
    tested = whole & (np.linalg.norm(residual, axis=0) > longest)
    return tested, residual[:, tested]


def _f_tail(explained: FloatArray, unexplained: FloatArray, numerator: int, df: int) -> FloatArray:
    """Upper tail of F with ``numerator`` and ``df`` degrees of freedom; for one it is two-sided t."""
    # P(F > f) = I_x(df / 2, numerator / 2) with x = df / (df + numerator f).
    whole = df * unexplained + numerator * explained
    p: FloatArray = np.maximum(
        special.betainc(df / 2.0, numerator / 2.0, df * unexplained / whole), SMALLEST_P
    )
    return p
