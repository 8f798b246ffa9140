"""Whether two sides share anything: a permutation test of the first canonical pair."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from workbench.engine.arrangements import arrangement_batches, count_arrangements
from workbench.engine.canonical import RIDGE_PATH
from workbench.engine.linear import ThinBasis, thin_basis
from workbench.engine.nuisance import Nuisance, standardise
from workbench.engine.sides import block_slices, block_weights
from workbench.engine.smallest_p import SmallestP, smallest_p
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

STATISTICS = ("wilks", "largest_root")
FEWEST_ARRANGEMENTS = 120
FEWEST_EXCEEDANCES = 50
CLEARLY_LARGE = 0.1
BATCH_NUMBERS = 2**19


@dataclass(frozen=True, eq=False)
class PairTest:
    """Permutation test of the first canonical pair.

    Attributes
    ----------
    p : float or None
        ``(1 + exceedances) / (1 + permutations)``; None when withheld.
    smallest_p : float
        The smallest p that the test as asked for could have reached.
    permutations, exceedances : int
        Arrangements looked at beside the observed one, and those at least as extreme.
    exhaustive : bool
        All arrangements were looked at: p is exact.
    stopped_early : bool
        p is clearly large, from fewer permutations than asked for.
    withheld : str or None
        Why there is no p.
    statistics : tuple of str
        ``wilks``: ``-log det(I - M'M)``; ``largest_root``: the largest eigenvalue of ``M'M``.
    ridge_multiples : ndarray of shape (9,)
        Ridges, in multiples of each side's noise level.
    observed : ndarray of shape (2, 9)
        Each statistic at each ridge.
    p_by_ridge : ndarray of shape (2, 9)
        Permutation p of each alone, NaN when withheld; ``p`` accounts for there being 18 of them.
    freedom : int
        Degrees of freedom ``n - c``.
    """

    p: float | None
    smallest_p: float
    permutations: int
    exceedances: int
    exhaustive: bool
    stopped_early: bool
    withheld: str | None
    statistics: tuple[str, ...]
    ridge_multiples: FloatArray
    observed: FloatArray
    p_by_ridge: FloatArray
    freedom: int


def canonical_pair_test(
    x: FloatArray,
    y: FloatArray,
    *,
    permutations: int = 1000,
    nuisance: FloatArray | None = None,
    random_state: int | None = None,
    early_stop: bool = True,
    progress: Callable[[int, int], None] | None = None,
    x_block_sizes: Sequence[int] | None = None,
    y_block_sizes: Sequence[int] | None = None,
) -> PairTest:
    """Test that the two sides share nothing, against a first canonical pair; any number of features.

    The samples of one side are permuted, and two statistics of the ridge problem's ``M`` recomputed in sample
    space at each of 9 ridges over four decades (the same multiple of the noise level on both sides); p is the
    permutation p of the smallest of the 18 p (:func:`smallest_p`). With a nuisance, the rows of an orthonormal
    basis of the ``n - c`` dimensions that it leaves are permuted in place of the samples: exact for normal
    errors, close otherwise. Without, exact for samples that are exchangeable.

    Not for several samples of one subject, or a common trend: such rows are not exchangeable, and p is far
    too small.

    Parameters
    ----------
    x, y : ndarray of shape (n_samples, p) and (n_samples, q)
        Constant features, and those that the nuisance explains, are left out.
    permutations : int
        At least 1; where there are no more arrangements than this, all of them are looked at.
    nuisance : ndarray of shape (n_samples, c), optional
        Columns to be removed from both sides, the intercept not among them.
    random_state : int, optional
        Seed; None draws one.
    early_stop : bool
        Stop once 50 or more exceedances put p above 0.1 by three standard errors.
    progress : callable, optional
        Called with permutations done and permutations in all.
    x_block_sizes, y_block_sizes : sequence of int, optional
        Features of each block of the side; blocks are brought to equal total variance.

    Raises
    ------
    NumericsError
        When values are not finite, rows differ in number, or a side has no variation left.

    References
    ----------
    Westfall & Young 1993, Resampling-Based Multiple Testing. Huh & Jhun 2001, Communications in Statistics -
    Theory and Methods 30:2023 (permuting in the residual basis).

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> shared = rng.normal(size=(30, 1))
    >>> x, y = shared + rng.normal(size=(30, 100)), shared + rng.normal(size=(30, 50))
    >>> canonical_pair_test(x, y, permutations=199, random_state=0).p
    0.005
    """
    if permutations < 1:
        raise NumericsError(f"permutations is {permutations}; allowed: at least 1")
    pair = _PermutedPair.of(x, y, nuisance, (x_block_sizes, y_block_sizes))
    observed = pair.statistics_of(np.arange(pair.size)[None])
    # The limit lies above what would make it exhaustive, so that "at least so many" is never taken for "all".
    available = count_arrangements(pair.size, max(permutations + 2, FEWEST_ARRANGEMENTS))
    if available < FEWEST_ARRANGEMENTS:
        return _withheld(pair, observed, available)
    plan = _Plan.of(available, permutations, random_state, early_stop)
    rows = [observed]
    for batch in arrangement_batches(pair.size, plan.wanted, plan.exhaustive, plan.seed, pair.batch):
        rows.append(pair.statistics_of(batch))
        done = sum(map(len, rows)) - 1
        if progress is not None:
            progress(done, plan.wanted)
        if plan.early_stop and done < plan.wanted and clearly_large(smallest_p(np.vstack(rows)), done):
            break
    statistics = np.vstack(rows)
    return _finished(pair, statistics, smallest_p(statistics), plan)


def clearly_large(result: SmallestP, permutations: int) -> bool:
    """Whether 50 or more exceedances put p above 0.1 by three standard errors."""
    error = np.sqrt(result.p * (1.0 - result.p) / (1 + permutations))
    return result.exceedances >= FEWEST_EXCEEDANCES and result.p - 3.0 * error > CLEARLY_LARGE


@dataclass(frozen=True, eq=False)
class _Plan:
    wanted: int
    exhaustive: bool
    early_stop: bool
    seed: np.random.SeedSequence

    @classmethod
    def of(cls, available: int, permutations: int, random_state: int | None, early_stop: bool) -> _Plan:
        exhaustive = available <= permutations + 1
        wanted = available - 1 if exhaustive else permutations
        return cls(wanted, exhaustive, early_stop and not exhaustive, np.random.SeedSequence(random_state))


@dataclass(frozen=True, eq=False)
class _PermutedPair:
    """Two sides in sample space; the one of higher rank is permuted.

    ``U_x' U_y`` of permuted rows is all that an arrangement needs: nothing of the features' size.
    """

    moved: FloatArray
    still: FloatArray
    moved_shrinkage: FloatArray
    still_shrinkage: FloatArray
    freedom: int

    @classmethod
    def of(
        cls,
        x: FloatArray,
        y: FloatArray,
        nuisance: FloatArray | None,
        block_sizes: tuple[Sequence[int] | None, Sequence[int] | None],
    ) -> _PermutedPair:
        n = np.shape(x)[0]
        if np.shape(y)[:1] != (n,):
            raise NumericsError(
                f"side X has {n} rows and side Y {np.shape(y)[0]}; give the same samples in the same order"
            )
        removed = Nuisance.of(nuisance, n)
        bases = [
            thin_basis(_residual_rows(values, removed, sizes, side))
            for values, sizes, side in zip((x, y), block_sizes, "XY", strict=True)
        ]
        still, moved = sorted(bases, key=lambda basis: basis.rank)
        return cls(moved.vectors, still.vectors, _shrinkages(moved), _shrinkages(still), n - removed.rank)

    @property
    def size(self) -> int:
        """Rows that are permuted: samples, or dimensions that the nuisance leaves."""
        return int(self.moved.shape[0])

    @property
    def batch(self) -> int:
        """Arrangements whose matrices fit a processor's cache, from 1 to 100."""
        return int(np.clip(BATCH_NUMBERS // self.moved.shape[1] ** 2, 1, 100))

    def statistics_of(self, arrangements: IndexArray) -> FloatArray:
        """Both statistics at every ridge, shape (n_arrangements, 18): Wilks-type ones first."""
        meetings = self.moved[arrangements].transpose(0, 2, 1) @ self.still
        wilks, roots = np.empty((2, len(arrangements), RIDGE_PATH.size))
        for k, (g_moved, g_still) in enumerate(zip(self.moved_shrinkage, self.still_shrinkage, strict=True)):
            m = g_moved[:, None] * meetings * g_still
            squares = np.linalg.eigvalsh(m.transpose(0, 2, 1) @ m).clip(0.0, 1.0 - np.finfo(float).eps)
            wilks[:, k] = -np.log1p(-squares).sum(axis=1)
            roots[:, k] = squares[:, -1]
        return np.hstack([wilks, roots])


def _residual_rows(
    values: FloatArray, removed: Nuisance, block_sizes: Sequence[int] | None, side: str
) -> FloatArray:
    """Standardised residuals as samples, or in a basis of the dimensions that a nuisance leaves."""
    block = standardise(values, removed)
    n_features = block.kept.size + block.dropped.size
    varies = np.isin(np.arange(n_features), block.kept)
    rows: FloatArray = block.values * block_weights(varies, block_slices(block_sizes, n_features, side))
    if removed.rank == 1:
        return rows
    left = scipy.linalg.qr(removed.basis)[0][:, removed.rank :]
    in_left: FloatArray = left.T @ rows
    return in_left


def _shrinkages(basis: ThinBasis) -> FloatArray:
    return np.array([basis.shrinkage(multiple * basis.noise_level) for multiple in RIDGE_PATH])


def _withheld(pair: _PermutedPair, observed: FloatArray, available: int) -> PairTest:
    shape = (len(STATISTICS), RIDGE_PATH.size)
    return PairTest(
        p=None,
        smallest_p=1.0 / available,
        permutations=0,
        exceedances=0,
        exhaustive=False,
        stopped_early=False,
        withheld=(
            f"only {available} arrangements of {pair.size} exchangeable rows exist, fewer than "
            f"{FEWEST_ARRANGEMENTS}: no p could be small enough to mean anything"
        ),
        statistics=STATISTICS,
        ridge_multiples=RIDGE_PATH.copy(),
        observed=observed.reshape(shape),
        p_by_ridge=np.full(shape, np.nan),
        freedom=pair.freedom,
    )


def _finished(pair: _PermutedPair, statistics: FloatArray, result: SmallestP, plan: _Plan) -> PairTest:
    shape = (len(STATISTICS), RIDGE_PATH.size)
    done = len(statistics) - 1
    return PairTest(
        p=result.p,
        smallest_p=1.0 / (1 + plan.wanted),
        permutations=done,
        exceedances=result.exceedances,
        exhaustive=plan.exhaustive,
        stopped_early=done < plan.wanted,
        withheld=None,
        statistics=STATISTICS,
        ridge_multiples=RIDGE_PATH.copy(),
        observed=statistics[0].reshape(shape),
        p_by_ridge=result.by_statistic.reshape(shape),
        freedom=pair.freedom,
    )
