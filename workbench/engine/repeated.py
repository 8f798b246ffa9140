"""Screening where subjects have several samples: between their visits, or between the subjects.

Between visits every subject is compared with itself. Samples are turned into contrasts that sum to zero
within each subject, so that whatever a subject has all the time is gone, and the visits' common course is
nuisance. Deviations that are close in time resemble each other, in both layers, which makes the plain test
far too liberal. So the contrasts are whitened by the covariance between visits that the features of both
blocks have on average: with normal values, a correlation of which either side is white has exactly the plain
test's distribution, whatever the other side does. With ``S + D`` and ``S - D`` (each of trace ``m``, ``S``
the average) for the two blocks, whitening by ``S`` leaves ``m r^2`` a mean of at most 1.

Features whose own course is smoother or rougher than the average are damped (:func:`course_damping`). Subjects
whose changes are large throughout a block are shrunk (:func:`~workbench.engine.odd_rows.steady_rows`), and
features of heavy tails replaced by normal scores (:func:`~workbench.engine.far_values.withstand`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import helmert
from scipy.stats import rankdata

from workbench.engine.mapped_block import MappedBlock, Ranks
from workbench.engine.nuisance import CONSTANT_TOLERANCE, Nuisance, indicators
from workbench.engine.odd_rows import steady_rows
from workbench.engine.screen import BlockPair, BlockScreen, Correlation, Progress, screen_blocks
from workbench.engine.subjects import SubjectDesign, centred, subject_means
from workbench.engine.tiles import Limits
from workbench.engine.unit_rows import Columns
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
Level = Literal["visits", "subjects"]

#: Smallest eigenvalue of a subject's covariance that is believed, as a share of their mean.
EIGENVALUE_FLOOR = 0.05
#: Features of a block that tell the covariance between visits; more add little.
TELLING = 4000
#: Fall of the autocorrelation per visit in the direction in which features differ from the average.
FALL = 0.5
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
    whitened : ndarray of shape (n_contrasts, n_samples)
        The same map without the rotation that makes room for an intercept.
    used : ndarray of int
        Samples that were used.
    """

    matrix: FloatArray
    nuisance: Nuisance
    blocks: tuple[IndexArray, ...]
    whitened: FloatArray
    used: IndexArray


def screen_repeated(
    pairs: Sequence[BlockPair],
    designs: Sequence[SubjectDesign],
    level: Level,
    *,
    fdr: float = 0.05,
    correlation: Correlation = "pearson",
    minimum_r: float = 0.0,
    maximum_edges: int | None = None,
    progress: Progress | None = None,
    limits: Limits | None = None,
) -> BlockScreen:
    """Edges between blocks of samples of which several are of one subject.

    Parameters
    ----------
    pairs : sequence of BlockPair
        Rows are samples; ``nuisance`` holds columns of the samples, or None. The visits' common course is
        removed without being named. A group that subjects are in for good has no part in changes unless it
        is given by visit (:func:`by_visit`).
    designs : sequence of SubjectDesign
        One for each pair of blocks, of its samples.
    level : {"visits", "subjects"}
        Correlations between changes within subjects, or between the subjects' means (adjusted for visits
        that a subject lacks).
    fdr, correlation, minimum_r, maximum_edges, progress, limits
        As for :func:`screen_pairs`. Odd subjects are withstood (but for ranks of means), and heavy tails by
        Pearson's correlation; ranks are those of the deviations from the subject's mean, or of the subjects' means.

    Returns
    -------
    BlockScreen
        ``n`` counts the samples used; ``df`` is that of the test: contrasts (or subjects) less nuisance
        less one.

    Raises
    ------
    NumericsError
        When no subject has two samples (level "visits"), shapes differ, or too few degrees of freedom are
        left.

    References
    ----------
    Dutilleul 1993, Biometrics 49:305 (the variance of a correlation between autocorrelated series).

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> design = SubjectDesign.of(np.repeat(np.arange(20), 3), np.tile([0, 1, 2], 20))
    >>> x, y = rng.normal(size=(60, 30)), rng.normal(size=(60, 20))
    >>> y[:, 7] += 2.0 * x[:, 3]
    >>> screen = screen_repeated([BlockPair("x and y", x, y)], [design], "visits")
    >>> screen.i, screen.j, screen.n, screen.df
    (array([3]), array([7]), array([60]), array([37]))
    """
    if len(pairs) != len(designs):
        raise NumericsError(f"{len(pairs)} pairs of blocks and {len(designs)} designs; give one for each")
    moved = [
        independent_pair(pair, design, level, correlation)
        for pair, design in zip(pairs, designs, strict=True)
    ]
    screen = screen_blocks(
        [pair for pair, _ in moved],
        fdr=fdr,
        correlation="pearson",
        minimum_r=minimum_r,
        maximum_edges=maximum_edges,
        progress=progress,
        limits=limits,
    )
    n = np.array([space.used.size for _, space in moved], dtype=np.int64)
    return replace(screen, n=n[screen.pair_index], correlation=correlation)


def independent_pair(
    pair: BlockPair, design: SubjectDesign, level: Level, correlation: Correlation = "pearson"
) -> tuple[BlockPair, SubjectSpace]:
    """Both blocks on independent rows, to be screened by Pearson's correlation, and the map that led there.

    Parameters
    ----------
    pair, design, level, correlation
        As for :func:`screen_repeated`; ranks are taken here.

    Raises
    ------
    NumericsError
        As :func:`screen_repeated`.
    """
    space = subject_space((pair.x, pair.y), design, _columns(pair), level, correlation)
    x, y = (mapped_block(side, design, space, level, correlation) for side in (pair.x, pair.y))
    damping = None
    if level == "visits":
        ranks: Ranks = "before" if correlation == "spearman" else "no"
        sides = (
            MappedBlock(side, design, np.eye(design.n_samples), ranks=ranks) for side in (pair.x, pair.y)
        )
        first, second = (course_damping(space, design, side) for side in sides)
        damping = (first, second)
    return BlockPair(pair.name, x, y, space.nuisance, damping=damping), space


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
        return SubjectSpace(matrix, basis, rows, matrix, np.arange(design.n_samples))
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


def course_damping(space: SubjectSpace, design: SubjectDesign, side: Columns) -> FloatArray:
    """Factors in (0, 1], one a feature, by which test statistics shrink for features of an unusual course.

    In the whitened rows the covariance of a feature is taken as ``I + (a + u) K``: ``K`` (trace 0,
    ``|K|^2 = m``) is the direction of more autocorrelation, ``a`` the block's mean, ``-a`` that of the
    other block, ``u`` the feature's own departure. A correlation then has the variance
    ``(1 + (a + u)(v - a)) / m <= (1 + u^2 / 2)(1 + v^2 / 2) / m``, so that multiplying it by
    ``(1 + u^2 / 2)^(-1/2)`` for each side keeps the plain test on the safe side (a smaller variance at
    fixed degrees of freedom is the larger p: Bernoulli's inequality on the beta tail). ``u^2`` is the
    posterior mean under a normal prior whose variance is what the estimates scatter beyond chance.
    """
    direction = _direction(space, design)
    if direction is None:
        return np.ones(int(side.shape[1]))
    free = space.whitened.shape[0]
    basis = _basis(space)
    estimates = np.full(int(side.shape[1]), np.nan)
    for start in range(0, estimates.size, _SLICE):
        stop = min(start + _SLICE, estimates.size)
        rows = space.whitened @ np.asarray(side[:, start:stop], dtype=np.float64)
        rows -= basis @ (basis.T @ rows)
        length = np.einsum("ij,ij->j", rows, rows)
        with np.errstate(invalid="ignore", divide="ignore"):
            estimates[start:stop] = np.einsum("ij,ij->j", rows, direction @ rows) / length
    return _factors(estimates, 2.0 / (free - basis.shape[1]))


def without_subject(
    space: SubjectSpace, x: FloatArray, y: FloatArray, i: IndexArray, j: IndexArray
) -> FloatArray:
    """Correlation of least size when any one subject is left out, for each pair, shape (n_pairs,).

    With residuals ``e``, ``f`` and the nuisance's hat matrix ``H``, leaving out the rows ``s`` of a subject
    lowers ``e'f`` by ``e_s' (I - H_ss)^(-1) f_s`` (the block form of Cook & Weisberg 1982, section 2.2); the
    whitening is kept.
    """
    ends_x, i = np.unique(i, return_inverse=True)
    ends_y, j = np.unique(j, return_inverse=True)
    basis = _basis(space)
    sides = [space.whitened @ side for side in (x[:, ends_x], y[:, ends_y])]
    e, f = (side - basis @ (basis.T @ side) for side in sides)
    products, squares_e, squares_f = np.einsum("nk,nk->k", e[:, i], f[:, j]), _squares(e), _squares(f)
    weakest = np.full(i.size, np.inf)
    for rows in space.blocks:
        left = np.linalg.pinv(np.eye(rows.size) - basis[rows] @ basis[rows].T, rcond=1e-10, hermitian=True)
        a, b = left @ e[rows], f[rows]
        less_e, less_f = np.einsum("rk,rk->k", a, e[rows]), np.einsum("rk,rk->k", left @ b, b)
        whole = (squares_e - less_e)[i] * (squares_f - less_f)[j]
        nothing = whole <= 1e-12 * squares_e[i] * squares_f[j]
        rest = products - np.einsum("rk,rk->k", a[:, i], b[:, j])
        r = np.where(nothing, 0.0, rest / np.sqrt(np.where(nothing, 1.0, whole)))
        weakest = np.where(np.abs(r) < np.abs(weakest), r, weakest)
    return weakest


def mapped_block(
    side: Columns, design: SubjectDesign, space: SubjectSpace, level: Level, correlation: Correlation
) -> MappedBlock:
    """One block on independent rows; odd subjects and (for Pearson's correlation) heavy tails withstood.

    Parameters
    ----------
    side : array or dataset of shape (n_samples, n_features)
    design, level, correlation
        As for :func:`screen_repeated`.
    space : SubjectSpace
        Of these samples.
    """
    ranked = correlation == "spearman"
    if ranked and level == "subjects":
        return MappedBlock(side, design, space.matrix, ranks="after")
    basis = _basis(space)
    rest = space.whitened - basis @ (basis.T @ space.whitened)
    step = -(-int(side.shape[1]) // TELLING)
    values = np.asarray(side[:, ::step], dtype=np.float64)
    values = values[:, np.isfinite(values).all(axis=0)]
    rows = rest @ (rankdata(centred(design, values), axis=0) if ranked else values)
    together = np.repeat(np.arange(len(space.blocks)), [place.size for place in space.blocks])
    factors = steady_rows(rows, together).factors if rows.shape[1] else np.ones(len(rest))
    return MappedBlock(
        side,
        design,
        factors[:, None] * rest,
        ranks="before" if ranked else "no",
        room=None if space.matrix is space.whitened else helmert(len(rest) + 1).T,
        freedom=0 if ranked else len(rest) - basis.shape[1],
    )


def _columns(pair: BlockPair) -> FloatArray | None:
    if isinstance(pair.nuisance, Nuisance):
        raise NumericsError(f"the nuisance of {pair.name!r} is a basis; give its columns")
    return pair.nuisance


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
    return SubjectSpace(room @ whitened, nuisance, tuple(blocks), whitened, used)


def _basis(space: SubjectSpace) -> FloatArray:
    """Orthonormal nuisance among the whitened rows (for means: with the intercept)."""
    if space.matrix is space.whitened:
        return space.nuisance.basis
    basis: FloatArray = helmert(space.matrix.shape[0]) @ space.nuisance.basis[:, 1:]
    return basis


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


def _direction(space: SubjectSpace, design: SubjectDesign) -> FloatArray | None:
    """``K``, the direction of more autocorrelation in the whitened rows; None where there is none.

    It is the derivative of ``f^lag`` by ``f`` at ``FALL``.
    """
    if design.kind != "visits":
        return None
    lag = np.abs(np.subtract.outer(design.visit, design.visit)).astype(np.float64)
    slope = np.where(np.equal.outer(design.subject, design.subject), lag * FALL ** (lag - 1.0), 0.0)
    full = space.whitened @ slope @ space.whitened.T
    full -= np.eye(len(full)) * np.trace(full) / len(full)
    length = np.linalg.norm(full)
    if length <= 1e-8:
        return None
    direction: FloatArray = full * (np.sqrt(len(full)) / length)
    return direction


def _factors(estimates: FloatArray, chance: float) -> FloatArray:
    known = np.isfinite(estimates)
    factors = np.ones(estimates.size)
    if np.count_nonzero(known) < 2:
        return factors
    off = estimates[known] - estimates[known].mean()
    spread = max(float(off @ off) / (off.size - 1) - chance, 0.0)
    kept = spread / (spread + chance)
    second = (kept * off) ** 2 + kept * chance
    factors[known] = 1.0 / np.sqrt(1.0 + second / 2.0)
    return factors


def _orthonormal(columns: FloatArray) -> FloatArray:
    left, sizes, _ = np.linalg.svd(columns, full_matrices=False)
    basis: FloatArray = left[:, sizes > 1e-8 * max(float(sizes.max(initial=0.0)), np.finfo(float).tiny)]
    return basis


def _squares(e: FloatArray) -> FloatArray:
    squares: FloatArray = np.einsum("nk,nk->k", e, e)
    return squares
