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
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine.nuisance import Nuisance
from workbench.engine.odd_rows import steady_rows
from workbench.engine.pairs.mapped_block import MappedBlock, Ranks
from workbench.engine.pairs.screen import BlockPair, BlockScreen, Correlation, Progress, screen_blocks
from workbench.engine.pairs.subject_space import TELLING, Level, SubjectSpace, subject_space
from workbench.engine.pairs.tiles import Limits
from workbench.engine.pairs.unit_rows import Columns
from workbench.engine.subjects import SubjectDesign, centred
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

#: Fall of the autocorrelation per visit in the direction in which features differ from the average.
FALL = 0.5
_SLICE = 1024


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
    return told_of_samples(screen, [space for _, space in moved], correlation)


def told_of_samples(
    screen: BlockScreen, spaces: Sequence[SubjectSpace], correlation: Correlation
) -> BlockScreen:
    """Return a screen of independent rows as one of the samples that they came from: their number, and the ranks.

    Parameters
    ----------
    screen : BlockScreen
        By Pearson's correlation of the rows.
    spaces : sequence of SubjectSpace
        Of each pair of blocks.
    correlation : {"pearson", "spearman"}
        Whether ranks were taken on the way to the rows.
    """
    n = np.array([space.used.size for space in spaces], dtype=np.int64)
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
    space = subject_space((pair.x, pair.y), design, sample_columns(pair), level, correlation)
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


def rows_by_subject(pair: BlockPair, design: SubjectDesign, level: Level) -> tuple[BlockPair, IndexArray]:
    """Both blocks on independent rows that each belong to one subject, and whose they are.

    For a comparison of groups of subjects by ranks: the rows of one group are a study of their own.

    Parameters
    ----------
    pair, design, level
        As for :func:`screen_repeated`.

    Returns
    -------
    pair : BlockPair
        Changes within subjects at equal variance, or subjects' means, with their nuisance (the visits' common course
        among it).
    subjects : ndarray of int, shape (n_rows,)
        Numbers of subjects in the design.
    """
    space = subject_space((pair.x, pair.y), design, sample_columns(pair), level)
    x, y = (
        replace(mapped_block(side, design, space, level, "pearson"), room=None, freedom=0)[:, :]
        for side in (pair.x, pair.y)
    )
    subjects = np.repeat(space.subjects, [rows.size for rows in space.blocks])
    columns = space.nuisance.basis[:, 1:] if space.contrasts is None else space.basis
    return BlockPair(pair.name, x, y, columns), subjects


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
    basis = space.basis
    free = len(basis)
    estimates = np.full(int(side.shape[1]), np.nan)
    for start in range(0, estimates.size, _SLICE):
        stop = min(start + _SLICE, estimates.size)
        rows = space.whitened @ np.asarray(side[:, start:stop], dtype=np.float64)
        rows -= basis @ (basis.T @ rows)
        estimates[start:stop] = _departures(rows, direction)
    return _factors(estimates, 2.0 / (free - basis.shape[1]))


def course_damping_of_rows(
    space: SubjectSpace, design: SubjectDesign, rows: FloatArray, nuisance: Nuisance
) -> FloatArray:
    """As :func:`course_damping`, of features that are on the rows of ``space.matrix`` already.

    Parameters
    ----------
    rows : ndarray of shape (n_rows, n_features)
        ``nuisance`` (of these rows, private variation among it) is removed from them.
    """
    direction = _direction(space, design)
    if direction is None:
        return np.ones(rows.shape[1])
    contrasts = space.contrasts_of(nuisance.residuals(rows))
    return _factors(_departures(contrasts, direction), 2.0 / (nuisance.n_samples - nuisance.rank))


def without_subject(space: SubjectSpace, x: Columns, y: Columns, i: IndexArray, j: IndexArray) -> FloatArray:
    """Correlation of least size when any one subject is left out, for each pair, shape (n_pairs,).

    With residuals ``e``, ``f`` and the nuisance's hat matrix ``H``, leaving out the rows ``s`` of a subject
    lowers ``e'f`` by ``e_s' (I - H_ss)^(-1) f_s`` (the block form of Cook & Weisberg 1982, section 2.2); the
    whitening, and private variation that is gone from ``x`` and ``y``, are kept.

    Parameters
    ----------
    x, y : array or block of shape (n_rows, n_features)
        On the rows of ``space.matrix``.
    """
    ends_x, i = np.unique(i, return_inverse=True)
    ends_y, j = np.unique(j, return_inverse=True)
    basis = space.basis
    sides = [space.contrasts_of(side[:, ends]) for side, ends in ((x, ends_x), (y, ends_y))]
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
    basis = space.basis
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
        room=space.room,
        freedom=0 if ranked else len(rest) - basis.shape[1],
        steady=factors,
    )


def sample_columns(pair: BlockPair) -> FloatArray | None:
    """Nuisance columns of a pair of blocks; a basis in their place is refused, as it cannot be mapped to other rows."""
    if isinstance(pair.nuisance, Nuisance):
        raise NumericsError(f"the nuisance of {pair.name!r} is a basis; give its columns")
    return pair.nuisance


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


def _departures(rows: FloatArray, direction: FloatArray) -> FloatArray:
    """How much smoother than the average each feature runs: ``e'Ke / e'e`` of its contrasts; NaN for zeros."""
    with np.errstate(invalid="ignore", divide="ignore"):
        departures: FloatArray = np.einsum("ij,ij->j", rows, direction @ rows) / _squares(rows)
    return departures


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


def _squares(e: FloatArray) -> FloatArray:
    squares: FloatArray = np.einsum("nk,nk->k", e, e)
    return squares
