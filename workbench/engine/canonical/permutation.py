"""Whether two sides share anything, and how many independent axes of it: a permutation test pair by pair."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from workbench.engine.arrangements import Exchange
from workbench.engine.canonical.pair_levels import PairLevel
from workbench.engine.canonical.pair_rows import Level, design_of, exchangeable_rows
from workbench.engine.smallest_p import SmallestP, smallest_p
from workbench.engine.subjects import SubjectDesign
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

STATISTICS = ("wilks", "largest_root")
FEWEST_ARRANGEMENTS = 120
FEWEST_EXCEEDANCES = 50
CLEARLY_LARGE = 0.1
LEVEL = 0.05


@dataclass(frozen=True, eq=False)
class PairTest:
    """Permutation test of one canonical pair, the pairs before it removed.

    Attributes
    ----------
    p : float or None
        ``(1 + exceedances) / (1 + permutations)``, of this pair alone; None when withheld.
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
    ridge_multiples : ndarray of shape (5,)
        Ridges, in multiples of each side's noise level.
    observed : ndarray of shape (2, 5)
        Each statistic at each ridge.
    p_by_ridge : ndarray of shape (2, 5)
        Permutation p of each alone, NaN when withheld; ``p`` accounts for there being 10 of them.
    freedom : int
        Degrees of freedom ``n - c``, less two for each earlier pair.
    exchanged : str
        What takes each other's places.
    further : tuple of PairTest
        Tests of the second, third, ... pair, as far as they were asked for and came.
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
    exchanged: str
    further: tuple[PairTest, ...] = ()

    @property
    def p_by_pair(self) -> FloatArray:
        """P of the first, second, ... pair, cumulated: no pair's is smaller than an earlier one's."""
        alone = [np.nan if one.p is None else one.p for one in (self, *self.further)]
        return np.maximum.accumulate(alone)

    def axes(self, level: float = LEVEL) -> int:
        """How many pairs, one after the other, have a cumulated p of at most ``level``."""
        return int(np.cumprod(self.p_by_pair <= level).sum())


def canonical_pair_test(
    x: FloatArray,
    y: FloatArray,
    *,
    permutations: int = 1000,
    nuisance: FloatArray | None = None,
    subjects: NDArray[Any] | SubjectDesign | None = None,
    times: NDArray[Any] | None = None,
    level: Level = "visits",
    pairs: int = 1,
    stop_above: float | None = LEVEL,
    random_state: int | None = None,
    early_stop: bool = True,
    progress: Callable[[int, int], None] | None = None,
    x_block_sizes: Sequence[int] | None = None,
    y_block_sizes: Sequence[int] | None = None,
) -> PairTest:
    """Test that the two sides share nothing, against a first canonical pair, then a second, and so on.

    The rows of one side are rearranged, and two statistics of the ridge problem's ``M`` recomputed in sample
    space at each of 5 ridges over four decades (the same multiple of the noise level on both sides); p is the
    permutation p of the smallest of the 10 p (:func:`smallest_p`). With a nuisance, the rows of an orthonormal
    basis of the ``n - c`` dimensions that it leaves are permuted in place of the samples: exact for normal
    errors, close otherwise. Without, exact for samples that are exchangeable.

    For pair ``k`` the variates ``u_j`` and ``v_j`` of the pairs before it, those at a tenth of the noise level, are
    nuisance for both sides, and the rows of ``n - c - 2(k - 1)`` dimensions are permuted; ridges stay as fixed at
    the first pair. Dropping the earlier singular vectors alone would find a second pair in every study with more
    features than samples. Read p cumulated over the pairs (``p_by_pair``).

    Several samples of one subject are never taken for independent, and what is exchanged follows the design
    (:func:`workbench.engine.canonical.pair_rows.exchangeable_rows`): differences of pairs, whole subjects of ordered
    visits, samples inside subjects for replicates without an order, or the subjects' means.

    Parameters
    ----------
    x, y : ndarray of shape (n_samples, p) and (n_samples, q)
        Constant features, and those that the nuisance explains, are left out.
    permutations : int
        At least 1; where there are no more arrangements than this, all of them are looked at.
    nuisance : ndarray of shape (n_samples, c), optional
        Columns to be removed from both sides, the intercept not among them.
    subjects : ndarray of shape (n_samples,) or SubjectDesign, optional
        Subject of each sample.
    times : ndarray of shape (n_samples,), optional
        What orders a subject's samples; without it they are taken for replicates.
    level : {"visits", "subjects"}
        With subjects: whether changes are tested, or the subjects' means.
    pairs : int
        Pairs to be tested, at least 1; fewer come back where the data have fewer.
    stop_above : float or None
        Test no further pair once the cumulated p exceeds this; None tests all.
    random_state : int, optional
        Seed; None draws one.
    early_stop : bool
        Stop once 50 or more exceedances put p above 0.1 by three standard errors.
    progress : callable, optional
        Called with permutations done and permutations in all, pair by pair.
    x_block_sizes, y_block_sizes : sequence of int, optional
        Features of each block of the side; blocks are brought to equal total variance.

    Raises
    ------
    NumericsError
        When values are not finite, rows differ in number, or a side has no variation left.

    References
    ----------
    Westfall & Young 1993, Resampling-Based Multiple Testing. Huh & Jhun 2001, Communications in Statistics -
    Theory and Methods 30:2023 (permuting in the residual basis). Winkler et al. 2020, NeuroImage 220:117065
    (further pairs).

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> shared = rng.normal(size=(30, 1))
    >>> x, y = shared + rng.normal(size=(30, 100)), shared + rng.normal(size=(30, 50))
    >>> test = canonical_pair_test(x, y, permutations=199, pairs=2, random_state=0)
    >>> test.p, test.axes()
    (0.005, 1)
    """
    for name, value in (("permutations", permutations), ("pairs", pairs)):
        if value < 1:
            raise NumericsError(f"{name} is {value}; allowed: at least 1")
    design = design_of(subjects, times)
    rows = exchangeable_rows((x, y), nuisance, design, level, (x_block_sizes, y_block_sizes))
    first = PairLevel.first(rows)
    entropy = np.random.SeedSequence(random_state).entropy
    tests: list[PairTest] = []
    here: PairLevel | None = first
    for k in range(min(pairs, first.rank)):
        here = first if k == 0 else first.without(k)
        if here is None or here.freedom < 1:
            break
        seed = np.random.SeedSequence(entropy, spawn_key=(k,) if k else ())
        tests.append(level_test(here, rows.words, permutations, seed, early_stop, progress))
        alone = tests[-1].p
        if alone is None or (stop_above is not None and alone > stop_above):
            break
    return replace(tests[0], further=tuple(tests[1:]))


class LevelOfTest(Protocol):
    """What a level of a test is asked for."""

    @property
    def exchange(self) -> Exchange:
        """Arrangements of the rows."""

    @property
    def path(self) -> FloatArray:
        """Ridges, in multiples of the noise levels."""

    @property
    def freedom(self) -> int:
        """Dimensions that nuisance and earlier components leave."""

    @property
    def batch(self) -> int:
        """Arrangements at a time."""

    def statistics_of(self, arrangements: IndexArray) -> FloatArray:
        """Both statistics at every ridge, shape (n_arrangements, 2 x n_ridges)."""


def level_test(
    here: LevelOfTest,
    exchanged: str,
    permutations: int,
    seed: np.random.SeedSequence,
    early_stop: bool,
    progress: Callable[[int, int], None] | None = None,
) -> PairTest:
    """Test one level by its statistics, of which large values count."""
    observed = here.statistics_of(np.arange(here.exchange.size)[None])
    # The limit lies above what would make it exhaustive, so that "at least so many" is never taken for "all".
    available = here.exchange.count(max(permutations + 2, FEWEST_ARRANGEMENTS))
    if available < FEWEST_ARRANGEMENTS:
        return _withheld(here, exchanged, observed, available)
    plan = _Plan.of(available, permutations, early_stop)
    rows = [observed]
    for batch in here.exchange.batches(plan.wanted, plan.exhaustive, seed, here.batch):
        rows.append(here.statistics_of(batch))
        done = sum(map(len, rows)) - 1
        if progress is not None:
            progress(done, plan.wanted)
        if plan.early_stop and done < plan.wanted and clearly_large(smallest_p(np.vstack(rows)), done):
            break
    statistics = np.vstack(rows)
    return _finished(here, exchanged, statistics, smallest_p(statistics), plan)


def clearly_large(result: SmallestP, permutations: int) -> bool:
    """Whether 50 or more exceedances put p above 0.1 by three standard errors."""
    error = np.sqrt(result.p * (1.0 - result.p) / (1 + permutations))
    return result.exceedances >= FEWEST_EXCEEDANCES and result.p - 3.0 * error > CLEARLY_LARGE


@dataclass(frozen=True, eq=False)
class _Plan:
    wanted: int
    exhaustive: bool
    early_stop: bool

    @classmethod
    def of(cls, available: int, permutations: int, early_stop: bool) -> _Plan:
        exhaustive = available <= permutations + 1
        return cls(available - 1 if exhaustive else permutations, exhaustive, early_stop and not exhaustive)


def _withheld(here: LevelOfTest, exchanged: str, observed: FloatArray, available: int) -> PairTest:
    shape = (len(STATISTICS), here.path.size)
    return PairTest(
        p=None,
        smallest_p=1.0 / available,
        permutations=0,
        exceedances=0,
        exhaustive=False,
        stopped_early=False,
        withheld=(
            f"only {available} arrangements of {here.exchange.size} exchangeable rows ({exchanged}) exist, fewer "
            f"than {FEWEST_ARRANGEMENTS}: no p could be small enough to mean anything"
        ),
        statistics=STATISTICS,
        ridge_multiples=here.path.copy(),
        observed=observed.reshape(shape),
        p_by_ridge=np.full(shape, np.nan),
        freedom=here.freedom,
        exchanged=exchanged,
    )


def _finished(
    here: LevelOfTest, exchanged: str, statistics: FloatArray, result: SmallestP, plan: _Plan
) -> PairTest:
    shape = (len(STATISTICS), here.path.size)
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
        ridge_multiples=here.path.copy(),
        observed=statistics[0].reshape(shape),
        p_by_ridge=result.by_statistic.reshape(shape),
        freedom=here.freedom,
        exchanged=exchanged,
    )
