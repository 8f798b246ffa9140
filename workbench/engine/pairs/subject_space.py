"""Several samples a subject as independent rows: contrasts within subjects at equal variance, or subjects' means."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import helmert
from scipy.stats import rankdata

from workbench.engine.nuisance import CONSTANT_TOLERANCE, Nuisance, indicators
from workbench.engine.pairs.screen import Correlation
from workbench.engine.pairs.unit_rows import Columns
from workbench.engine.subjects import SubjectDesign, centred, subject_means
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
Level = Literal["visits", "subjects"]

#: Smallest eigenvalue of a subject's covariance that is believed, as a share of their mean.
EIGENVALUE_FLOOR = 0.05
#: Features of a block that tell the covariance between visits; more add little.
TELLING = 4000
_SLICE = 1024


@dataclass(frozen=True, eq=False)
class SubjectSpace:
    """A linear map from samples to independent rows, and the nuisance among these rows.

    Attributes
    ----------
    matrix : ndarray of shape (n_rows, n_samples)
        Rows sum to zero over all rows between visits, so that removing an intercept changes nothing.
    nuisance : Nuisance
        Of the new rows; its rank counts an intercept.
    blocks : tuple of ndarray
        Rows of each subject's contrasts in ``whitened``; for means one row each.
    subjects : ndarray of int
        Numbers of these subjects in the design.
    whitened : ndarray of shape (n_contrasts, n_samples)
        The same map without the rotation that makes room for an intercept.
    used : ndarray of int
        Samples that were used.
    contrasts : ndarray of shape (n_contrasts, n_samples) or None
        Orthonormal contrasts within subjects before they are whitened; None for means.
    """

    matrix: FloatArray
    nuisance: Nuisance
    blocks: tuple[IndexArray, ...]
    subjects: IndexArray
    whitened: FloatArray
    used: IndexArray
    contrasts: FloatArray | None = None

    @property
    def room(self) -> FloatArray | None:
        """The rotation that makes room for an intercept, shape (n_rows, n_contrasts); None for means."""
        return None if self.contrasts is None else helmert(len(self.contrasts) + 1).T

    @property
    def basis(self) -> FloatArray:
        """Orthonormal nuisance among the whitened rows (for means: with the intercept)."""
        if self.contrasts is None:
            return self.nuisance.basis
        basis: FloatArray = self.contrasts_of(self.nuisance.basis[:, 1:])
        return basis

    def contrasts_of(self, rows: FloatArray) -> FloatArray:
        """Rows of ``matrix`` turned back to those of ``whitened``."""
        found: FloatArray = rows if self.room is None else self.room.T @ rows
        return found

    def on_samples(self, rows: FloatArray) -> FloatArray:
        """Deviations by sample whose products are those of the rows; for means the rows, one a subject.

        They sum to zero over each subject, so that the correlation of two features over the samples is that over
        the rows. With ``C`` the contrasts it is ``C'`` times them, at equal variance after whitening.

        Parameters
        ----------
        rows : ndarray of shape (n_rows, k)

        Returns
        -------
        ndarray of shape (n_used, k) or (n_subjects, k)
            Samples as in ``used``.
        """
        if self.contrasts is None:
            return rows
        deviations: FloatArray = self.contrasts[:, self.used].T @ self.contrasts_of(rows)
        return deviations


def subject_space(
    blocks: Sequence[Columns],
    design: SubjectDesign,
    nuisance: FloatArray | None,
    level: Level,
    correlation: Correlation = "pearson",
) -> SubjectSpace:
    """Map of the blocks' samples to independent rows.

    Parameters
    ----------
    blocks : sequence of array or dataset of shape (n_samples, n_features)
        Together they tell the covariance between visits.
    nuisance : ndarray of shape (n_samples, n_columns) or None

    Raises
    ------
    NumericsError
        When the design is of other samples, or has no subject with two samples (level "visits").
    """
    for side in blocks:
        if side.shape[0] != design.n_samples:
            raise NumericsError(
                f"a block has {side.shape[0]} samples and the design {design.n_samples}; give the same"
            )
    columns = np.empty((design.n_samples, 0)) if nuisance is None else np.asarray(nuisance, dtype=np.float64)
    if level == "subjects":
        matrix = _means_matrix(design)
        basis = Nuisance.of(_moved_columns(matrix, columns), design.n_subjects)
        rows = tuple(np.array([row]) for row in range(design.n_subjects))
        return SubjectSpace(matrix, basis, rows, np.arange(len(rows)), matrix, np.arange(design.n_samples))
    if level != "visits":
        raise NumericsError(f"level is {level!r}; allowed: 'visits', 'subjects'")
    if not design.repeated.any():
        raise NumericsError(f"{design.reason}; changes between visits need subjects with two samples or more")
    return _visits_space(blocks, design, np.hstack([_course(design), columns]), correlation)


def by_visit(design: SubjectDesign, columns: FloatArray) -> FloatArray:
    """Columns by visit: what removes the course of each group, where subjects stay in their group.

    Each column is multiplied by the indicator of every visit but the first; the columns themselves come
    first (they matter where they change within a subject). Without an order the columns alone.

    Examples
    --------
    >>> design = SubjectDesign.of(np.array([0, 0, 1, 1]), np.array([0, 1, 0, 1]))
    >>> by_visit(design, np.array([[0.0], [0.0], [1.0], [1.0]]))
    array([[0., 0.],
           [0., 0.],
           [1., 0.],
           [1., 1.]])
    """
    columns = np.asarray(columns, dtype=np.float64)
    course = _course(design)
    products = (columns[:, :, None] * course[:, None, :]).reshape(len(columns), -1)
    return np.hstack([columns, products])


def _course(design: SubjectDesign) -> FloatArray:
    """Give indicators of the visits but the first; nothing for samples without an order."""
    if design.kind not in ("pairs", "visits"):
        return np.empty((design.n_samples, 0))
    return indicators(design.visit)


def _means_matrix(design: SubjectDesign) -> FloatArray:
    """Map to subjects' means, adjusted for the visits that each lacks by the visits' common course."""
    course = _course(design)
    means = subject_means(design, np.eye(design.n_samples))
    within = centred(design, course)
    if not course.shape[1]:
        return means
    effects = np.linalg.pinv(within, rcond=1e-10) @ centred(design, np.eye(design.n_samples))
    adjusted: FloatArray = means - subject_means(design, course - course.mean(axis=0)) @ effects
    return adjusted


def _moved_columns(matrix: FloatArray, columns: FloatArray) -> FloatArray:
    """Nuisance columns after the map, exactly zero where only rounding is left of them."""
    moved: FloatArray = matrix @ columns
    whole = np.linalg.norm(matrix, 2) * np.linalg.norm(columns, axis=0)
    moved[:, np.linalg.norm(moved, axis=0) <= CONSTANT_TOLERANCE * whole] = 0.0
    return moved


def _visits_space(
    sides: Sequence[Columns], design: SubjectDesign, columns: FloatArray, correlation: Correlation
) -> SubjectSpace:
    used = np.flatnonzero(design.repeated)
    order = used[np.lexsort((design.visit[used], design.subject[used]))]
    members = np.split(order, np.flatnonzero(np.diff(design.subject[order])) + 1)
    contrasts = np.zeros((used.size - len(members), design.n_samples))
    blocks, start = [], 0
    for rows in members:
        place = np.arange(start, start + rows.size - 1)
        contrasts[np.ix_(place, rows)] = helmert(rows.size)
        blocks.append(place)
        start += rows.size - 1
    whitened = contrasts
    if design.kind in ("pairs", "visits"):
        variogram = _variogram(sides, design, contrasts, columns, correlation)
        whitened = _whitened(contrasts, members, blocks, design.visit, variogram)
    room = helmert(start + 1).T
    nuisance = Nuisance.of(room @ _moved_columns(whitened, columns), start + 1)
    subjects = np.array([design.subject[rows[0]] for rows in members], dtype=np.intp)
    return SubjectSpace(room @ whitened, nuisance, tuple(blocks), subjects, whitened, used, contrasts)


def _variogram(
    sides: Sequence[Columns],
    design: SubjectDesign,
    contrasts: FloatArray,
    columns: FloatArray,
    correlation: Correlation,
) -> FloatArray:
    """Half the mean squared difference between two visits, mean over the blocks of features of unit size.

    Visits that no subject has both of are NaN.
    """
    n_visits = int(design.visit.max()) + 1
    nuisance = _orthonormal(_moved_columns(contrasts, columns))
    total = np.zeros((n_visits, n_visits))
    for side in sides:
        step = -(-int(side.shape[1]) // TELLING)
        moments = np.zeros((design.n_samples, design.n_samples))
        for start in range(0, int(side.shape[1]), _SLICE * step):
            values = np.asarray(side[:, start : start + _SLICE * step], dtype=np.float64)[:, ::step]
            values = values[:, np.isfinite(values).all(axis=0)]
            if correlation == "spearman":
                values = rankdata(centred(design, values), axis=0)
            deviations = contrasts.T @ _unit_columns(contrasts @ values, nuisance)
            moments += deviations @ deviations.T
        total += _pair_differences(moments, design, n_visits)
    return total


def _unit_columns(rows: FloatArray, nuisance: FloatArray) -> FloatArray:
    """Residuals of unit length; columns without variance left are taken out."""
    rest = rows - nuisance @ (nuisance.T @ rows)
    length = np.linalg.norm(rest, axis=0)
    varies = length > 1e-8 * np.linalg.norm(rows, axis=0)
    unit: FloatArray = rest[:, varies] / length[varies]
    return unit


def _pair_differences(moments: FloatArray, design: SubjectDesign, n_visits: int) -> FloatArray:
    """Mean half squared differences by pair of visits, scaled to a mean of one over a subject's pairs."""
    squares = np.diag(moments)
    half = (squares[:, None] + squares[None, :]) / 2.0 - moments
    same = np.equal.outer(design.subject, design.subject) & ~np.eye(design.n_samples, dtype=bool)
    one, other = np.nonzero(same)
    sums, counts = np.zeros((2, n_visits, n_visits))
    np.add.at(sums, (design.visit[one], design.visit[other]), half[one, other])
    np.add.at(counts, (design.visit[one], design.visit[other]), 1.0)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean: FloatArray = sums / counts
    whole = sums.sum() / max(counts.sum(), 1.0)
    return mean / whole if whole > 0 else np.where(np.isnan(mean), np.nan, 1.0)


def _whitened(
    contrasts: FloatArray,
    members: Sequence[IndexArray],
    blocks: Sequence[IndexArray],
    visit: IndexArray,
    variogram: FloatArray,
) -> FloatArray:
    """Contrasts multiplied by the inverse root of their covariance, subject by subject."""
    whitened = np.zeros_like(contrasts)
    for rows, place in zip(members, blocks, strict=True):
        between = variogram[np.ix_(visit[rows], visit[rows])].copy()
        np.fill_diagonal(between, 0.0)
        own = contrasts[np.ix_(place, rows)]
        values, vectors = np.linalg.eigh(-own @ between @ own.T)
        values = np.maximum(values, EIGENVALUE_FLOOR * max(values.mean(), np.finfo(float).tiny))
        whitened[np.ix_(place, rows)] = (vectors / np.sqrt(values)) @ vectors.T @ own
    return whitened


def _orthonormal(columns: FloatArray) -> FloatArray:
    left, sizes, _ = np.linalg.svd(columns, full_matrices=False)
    basis: FloatArray = left[:, sizes > 1e-8 * max(float(sizes.max(initial=0.0)), np.finfo(float).tiny)]
    return basis
