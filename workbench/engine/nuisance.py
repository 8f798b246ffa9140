"""Nuisance variation: the intercept and unwanted columns, and blocks with them regressed out.

One rule says which nuisance columns count: going from left to right, a column counts when, centred and
scaled to length one, more than ``ALIAS_TOLERANCE`` of its length is outside the span of the intercept and
the columns that counted before it. One rule says which features have variance left: the residual is longer
than ``CONSTANT_TOLERANCE`` times the feature as it came.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

ALIAS_TOLERANCE = 1e-8
CONSTANT_TOLERANCE = 1e-10


@dataclass(frozen=True, eq=False)
class Nuisance:
    """Orthonormal basis of the intercept and the nuisance columns of one set of samples.

    Attributes
    ----------
    basis : ndarray of shape (n_samples, rank)
        Orthonormal columns ``Q``; the first one is the intercept, ``1 / sqrt(n)``.
    kept : ndarray of int
        Positions of the columns that counted; the others are in the span of those before them.

    Examples
    --------
    >>> batch = np.array([[0.0], [0.0], [1.0], [1.0]])
    >>> nuisance = Nuisance.of(batch, 4)
    >>> nuisance.rank
    2
    >>> nuisance.residuals(np.array([1.0, 3.0, 10.0, 14.0]))
    array([-1.,  1., -2.,  2.])
    """

    basis: FloatArray
    kept: NDArray[np.intp]

    @classmethod
    def of(cls, columns: FloatArray | None, n: int) -> Nuisance:
        """Basis of the intercept and ``columns``.

        Parameters
        ----------
        columns : ndarray of shape (n_samples, n_columns) or None
            Nuisance columns, classes already as indicators; ``None`` stands for the intercept alone.
            Columns that are linear combinations of the others are allowed and add no rank.
        n : int
            Number of samples, at least 1.

        Raises
        ------
        NumericsError
            When the columns have another number of rows than ``n``, or values that are not finite.
        """
        basis, kept = _orthonormal(_check_columns(columns, n))
        return cls(basis, kept)

    @property
    def n_samples(self) -> int:
        """Number of samples (rows of the basis)."""
        return int(self.basis.shape[0])

    @property
    def rank(self) -> int:
        """Number of dimensions ``c`` that the nuisance takes, the intercept counted."""
        return int(self.basis.shape[1])

    def residuals(self, x: FloatArray) -> FloatArray:
        """``(I - QQ') x``, the part of ``x`` that the nuisance does not explain.

        Parameters
        ----------
        x : ndarray of shape (n_samples,) or (n_samples, n_features)
            A feature with a missing value comes back missing as a whole.

        Raises
        ------
        NumericsError
            When ``x`` has another number of rows than the basis.
        """
        x = np.asarray(x, dtype=np.float64)
        if x.shape[:1] != (self.n_samples,):
            raise NumericsError(
                f"the block has {x.shape[0] if x.ndim else 'no'} rows and the nuisance {self.n_samples}; "
                "give both for the same samples, in the same order"
            )
        # Centring first keeps digits when the mean is far larger than the spread.
        centred: FloatArray = x - x.mean(axis=0)
        if self.rank > 1:
            centred -= self.basis @ (self.basis.T @ centred)
        return centred


def aliased(columns: FloatArray, names: Sequence[str]) -> tuple[str, ...]:
    """Names of the columns that lie in the span of the intercept and the columns before them.

    Parameters
    ----------
    columns : ndarray of shape (n_samples, n_columns)
    names : sequence of str
        One name per column; several indicators of one factor may share a name, which comes back once.

    Raises
    ------
    NumericsError
        When names and columns differ in number, or values are not finite.

    Examples
    --------
    >>> group = np.array([0.0, 0.0, 1.0, 1.0])
    >>> aliased(np.column_stack([group, 1.0 - group]), ["group", "batch"])
    ('batch',)
    """
    columns = check_named(columns, names)
    _, kept = _orthonormal(_check_columns(columns, columns.shape[0]))
    counted = set(kept.tolist())
    return tuple(dict.fromkeys(name for j, name in enumerate(names) if j not in counted))


def check_named(columns: FloatArray, names: Sequence[str]) -> FloatArray:
    """Columns as numbers, one name for each.

    Raises
    ------
    NumericsError
        When names and columns differ in number.
    """
    columns = np.asarray(columns, dtype=np.float64)
    if columns.ndim != 2 or columns.shape[1] != len(names):
        raise NumericsError(
            f"{len(names)} names for columns of shape {columns.shape}; give one name per column"
        )
    return columns


def indicators(codes: NDArray[np.integer]) -> FloatArray:
    """One column for each code that occurs but the lowest, shape (n_samples, n_codes - 1).

    Examples
    --------
    >>> indicators(np.array([0, 2, 2, 5])).tolist()
    [[0.0, 0.0], [1.0, 0.0], [1.0, 0.0], [0.0, 1.0]]
    """
    return np.asarray(codes[:, None] == np.unique(codes)[None, 1:], dtype=np.float64)


@dataclass(frozen=True, eq=False)
class Standardised:
    """A block with the nuisance removed, each feature at unit variance.

    Attributes
    ----------
    values : ndarray of shape (n_samples, n_kept)
        Residuals divided by ``scale``: every column has the sum of squares ``n - c``.
    scale : ndarray of shape (n_kept,)
        Residual standard deviation with ``n - c`` degrees of freedom.
    kept, dropped : ndarray of int
        Positions of the features with variance left, and of those with none.
    rank : int
        Dimensions ``c`` of the nuisance, intercept included.
    """

    values: FloatArray
    scale: FloatArray
    kept: NDArray[np.intp]
    dropped: NDArray[np.intp]
    rank: int


def standardise(x: FloatArray, nuisance: Nuisance | None = None) -> Standardised:
    """Residuals of ``x`` scaled to unit variance with ``n - c`` degrees of freedom.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
    nuisance : Nuisance, optional
        The intercept alone when left out.

    Raises
    ------
    NumericsError
        When ``x`` is not finite, no degree of freedom is left, or no feature has variance left.

    Examples
    --------
    >>> block = standardise(np.array([[1.0, 5.0], [2.0, 5.0], [4.0, 5.0]]))
    >>> block.kept, block.dropped, round(float(block.values.var(ddof=1)), 12)
    (array([0]), array([1]), 1.0)
    """
    x = check_finite(x, "the block")
    nuisance = nuisance or Nuisance.of(None, x.shape[0])
    residual = nuisance.residuals(x)
    scale, varies = residual_scale(x, residual, nuisance.rank)
    kept = np.flatnonzero(varies)
    if kept.size == 0:
        raise NumericsError(
            f"none of the {x.shape[1]} features has variance left after the nuisance "
            f"({nuisance.rank} of {nuisance.n_samples} dimensions); remove fewer, or leave the block out"
        )
    values = (residual if varies.all() else residual[:, kept]) / scale[kept]
    return Standardised(values, scale[kept], kept, np.flatnonzero(~varies), nuisance.rank)


@dataclass(frozen=True, eq=False)
class FittedResiduals:
    """A nuisance regression and scaling learnt from training rows, to be used on any rows.

    Attributes
    ----------
    mean : ndarray of shape (n_features,)
        Training mean of the features.
    column_mean : ndarray of shape (n_columns,)
        Training mean of the nuisance columns.
    coefficients : ndarray of shape (n_columns, n_features)
        Least-squares coefficients; zero for columns that are aliased among the training rows.
    alias : ndarray of shape (n_columns, n_columns)
        Column ``j`` tells how (centred) column ``j`` is made of the counted ones in training.
    rank : int
        Dimensions ``c`` of the nuisance in training, the intercept counted.
    scale : ndarray of shape (n_features,)
        Residual standard deviation in training, ``n - c`` degrees of freedom.
    varies : ndarray of bool, shape (n_features,)
        Features that have variance left in training.
    """

    mean: FloatArray
    column_mean: FloatArray
    coefficients: FloatArray
    alias: FloatArray
    rank: int
    scale: FloatArray
    varies: NDArray[np.bool_]

    def transform(self, columns: FloatArray | None, x: FloatArray) -> FloatArray:
        """Residuals of ``x`` from the regression that the training rows taught; unscaled, all features."""
        x = np.asarray(x, dtype=np.float64)
        offsets = self._check_columns(columns, x.shape[0]) - self.column_mean
        residual: FloatArray = (x - self.mean) - offsets @ self.coefficients
        return residual

    def standardised(self, columns: FloatArray | None, x: FloatArray) -> FloatArray:
        """Residuals divided by the training standard deviation; only features that vary in training."""
        scaled: FloatArray = self.transform(columns, x)[:, self.varies] / self.scale[self.varies]
        return scaled

    def estimable(self, columns: FloatArray | None, n: int) -> NDArray[np.bool_]:
        """Which of ``n`` rows the training rows can predict: ``False`` for one with a level never seen.

        A row is estimable when every aliased column is the same combination of the counted ones as in
        training (to 1e-6 of the column's largest value).
        """
        offsets = self._check_columns(columns, n) - self.column_mean
        gap = np.abs(offsets - offsets @ self.alias)
        largest = np.maximum(np.abs(offsets).max(axis=0, initial=0.0), np.abs(self.column_mean))
        return np.asarray((gap <= 1e-6 * largest).all(axis=1))

    def _check_columns(self, columns: FloatArray | None, n: int) -> FloatArray:
        checked = _check_columns(columns, n)
        if checked.shape[1] != self.column_mean.size:
            raise NumericsError(
                f"the regression was learnt with {self.column_mean.size} nuisance columns and now gets "
                f"{checked.shape[1]}; give the same columns in the same order"
            )
        return checked


def fit_residuals(train_columns: FloatArray | None, x_train: FloatArray) -> FittedResiduals:
    """Nuisance regression and scaling of a block, learnt from the training rows alone.

    Parameters
    ----------
    train_columns : ndarray of shape (n_train, n_columns) or None
    x_train : ndarray of shape (n_train, n_features)

    Raises
    ------
    NumericsError
        When values are not finite or no degree of freedom is left in training.

    Examples
    --------
    >>> age = np.array([[1.0], [2.0], [3.0], [4.0]])
    >>> fitted = fit_residuals(age, 2.0 * age + 1.0)
    >>> fitted.transform(np.array([[10.0]]), np.array([[22.0]])).round(9)
    array([[1.]])
    """
    x = check_finite(x_train, "the training block")
    columns = _check_columns(train_columns, x.shape[0])
    basis, kept = _orthonormal(columns)
    column_mean = columns.mean(axis=0)
    centred = columns - column_mean
    # One solve gives the features' coefficients and those of the aliased columns; both in scaled units.
    norm = np.linalg.norm(centred[:, kept], axis=0)
    solved = np.linalg.lstsq(centred[:, kept] / norm, np.hstack([x - x.mean(axis=0), centred]), rcond=None)[0]
    every = np.zeros((columns.shape[1], x.shape[1] + columns.shape[1]))
    every[kept] = solved / norm[:, None]
    coefficients, alias = every[:, : x.shape[1]], every[:, x.shape[1] :]
    residual = Nuisance(basis, kept).residuals(x)
    scale, varies = residual_scale(x, residual, basis.shape[1])
    return FittedResiduals(x.mean(axis=0), column_mean, coefficients, alias, basis.shape[1], scale, varies)


def residual_scale(x: FloatArray, residual: FloatArray, rank: int) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Residual standard deviations (``n - rank`` degrees of freedom) and which features vary at all.

    A feature varies when its residual is longer than ``CONSTANT_TOLERANCE`` times the feature itself.

    Raises
    ------
    NumericsError
        When ``rank`` leaves no degree of freedom.
    """
    n = x.shape[0]
    if n <= rank:
        raise NumericsError(
            f"{n} samples and a nuisance of {rank} dimensions (with intercept) leave no degree of freedom; "
            "remove fewer nuisance columns, or add samples"
        )
    length, whole = (np.sqrt(np.einsum("ij,ij->j", one, one)) for one in (residual, x))
    varies = length > CONSTANT_TOLERANCE * whole
    return length / np.sqrt(n - rank), np.asarray(varies)


def check_finite(x: FloatArray, what: str) -> FloatArray:
    """``x`` as a two-dimensional float64 array of finite numbers.

    Raises
    ------
    NumericsError
        When it has another shape, no row or column, or a missing or infinite value; the message says where.
    """
    x = np.asarray(x, dtype=np.float64)
    if x.ndim != 2 or 0 in x.shape:
        raise NumericsError(
            f"{what} has shape {x.shape}; it must be samples x features, at least one of each"
        )
    finite = np.isfinite(x)
    if not finite.all():
        row, column = np.argwhere(~finite)[0]
        raise NumericsError(
            f"{what} has {np.count_nonzero(~finite)} missing or infinite values, the first in row {row}, "
            f"column {column} (from 0); fill the gaps first, or leave the feature out"
        )
    return x


def _check_columns(columns: FloatArray | None, n: int) -> FloatArray:
    if n < 1:
        raise NumericsError(f"{n} samples; at least 1 is needed")
    if columns is None:
        return np.empty((n, 0))
    checked = np.asarray(columns, dtype=np.float64)
    if checked.ndim != 2 or checked.shape[0] != n:
        raise NumericsError(
            f"the nuisance columns have shape {checked.shape}; give one row for each of the {n} samples"
        )
    if not np.isfinite(checked).all():
        row, column = np.argwhere(~np.isfinite(checked))[0]
        raise NumericsError(
            f"nuisance column {column} has a missing or infinite value in row {row} (both from 0); "
            "leave the sample out, or fill the value"
        )
    return checked


def _orthonormal(columns: FloatArray) -> tuple[FloatArray, NDArray[np.intp]]:
    """Gram-Schmidt basis (each column projected twice), and which columns counted."""
    n = columns.shape[0]
    basis = [np.full(n, 1.0 / np.sqrt(n))]
    kept: list[int] = []
    for j in range(columns.shape[1]):
        vector = columns[:, j] - columns[:, j].mean()
        length = float(np.linalg.norm(vector))
        if length <= CONSTANT_TOLERANCE * float(np.linalg.norm(columns[:, j])):
            continue
        vector = vector / length
        for _ in range(2):
            spanned = np.column_stack(basis)
            vector = vector - spanned @ (spanned.T @ vector)
        left = float(np.linalg.norm(vector))
        if left > ALIAS_TOLERANCE:
            basis.append(vector / left)
            kept.append(j)
    return np.column_stack(basis), np.array(kept, dtype=np.intp)
