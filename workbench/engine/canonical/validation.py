"""Out-of-sample canonical correlations: an outer loop that repeats everything that was chosen."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.canonical.canonical import RidgePair, check_ridge, is_auto
from workbench.engine.canonical.fold_scores import decompose_split, pooled_score, score_fold
from workbench.engine.canonical.ridge_choice import RidgeChoice, choose_ridge
from workbench.engine.canonical.splits import Split, SplitSource
from workbench.engine.folds import Seed
from workbench.engine.subject_folds import make_folds
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
Labels = NDArray[np.generic] | None


@dataclass(frozen=True, eq=False)
class CrossValidation:
    """Out-of-sample correlations of the first, second, ... canonical pair of a training part.

    Attributes
    ----------
    correlations : ndarray of shape (n_components,)
        Mean over the repeats; about 0 (either side) where nothing is shared.
    standard_errors : ndarray of shape (n_components,)
        Mean over the repeats of the delta-method standard error; repeats use the same samples, so that
        more of them do not make it smaller.
    by_repeat : ndarray of shape (repeats, n_components)
    ridges : ndarray of shape (repeats, folds, 2)
        Multiples of the noise levels used in each outer fold, X and Y.
    choice : RidgeChoice or None
        The choice on all samples, for the final fit; None when the ridge was given.
    n_scored : ndarray of int of shape (repeats,)
        Samples scored in each repeat.
    n_components, folds, repeats : int
        As asked.
    """

    correlations: FloatArray
    standard_errors: FloatArray
    by_repeat: FloatArray
    ridges: FloatArray
    choice: RidgeChoice | None
    n_scored: IndexArray
    n_components: int
    folds: int
    repeats: int


def cross_validated_correlations(
    source: SplitSource,
    n: int,
    labels: Labels = None,
    *,
    n_components: int = 2,
    ridge: object = "auto",
    folds: int = 5,
    repeats: int = 5,
    seed: int = 0,
    subjects: IndexArray | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> CrossValidation:
    """Out-of-sample correlation of each canonical pair, from repeated double cross-validation.

    In each outer fold the ridge is chosen anew by :func:`choose_ridge` on the training part alone, the pairs
    are fitted there and the test samples scored. A repeat's figure for pair ``k`` is
    ``sum u v / sqrt(sum u^2 sum v^2)`` over all samples scored, each by pair ``k`` of its own training part.

    Pairs go by their order in the training part. Matching them across folds by the correlation of their
    scores, to the fit on all samples or to another fold, would let the test samples choose: those fits have
    seen them. On noise (40 samples, two pairs) it lifts the first pair to +0.08 or +0.04 and lowers the
    second as much, where order gives 0.00. The price of order is that two pairs of nearly equal strength,
    which change places from fold to fold, have their figures averaged.

    Parameters
    ----------
    source : callable
        Split of given training and test positions, for example :func:`array_source`.
    n : int
        Number of samples.
    labels : ndarray of shape (n,) or (n, n_factors), optional
        Levels to be spread over the folds, outer and inner.
    n_components : int
        Pairs wanted, at least 1.
    ridge : "auto", float or pair of float
        Multiples of each side's noise level in the training part; "auto" chooses.
    folds : int
        Of the outer loop, and of the inner one.
    repeats : int
        Of the outer loop, at least 1.
    seed : int
        Repeat ``r`` draws its folds from the seed and ``r``, so that repeats do not depend on each other.
    subjects : ndarray of int, shape (n,), optional
        Subject of each row; all rows of one are on the same side of every split.
    progress : callable, optional
        Called with outer folds done and outer folds in all.

    Raises
    ------
    NumericsError
        When the data support fewer pairs, folds cannot be formed, or no ridge is asked where features are
        too many.

    References
    ----------
    Stone 1974, JRSS B 36:111 (the double loop).

    Examples
    --------
    >>> from workbench.engine.canonical.splits import array_source
    >>> rng = np.random.default_rng(0)
    >>> source = array_source(rng.normal(size=(40, 90)), rng.normal(size=(40, 60)))
    >>> noise = cross_validated_correlations(source, 40, ridge=1.0, n_components=1)
    >>> bool(abs(noise.correlations[0]) < 3 * noise.standard_errors[0])
    True
    """
    if repeats < 1 or n_components < 1:
        raise NumericsError(f"{repeats} repeats of {n_components} pairs; at least 1 of each is needed")
    given = None if is_auto(ridge) else check_ridge(ridge)
    choice = None
    if given is None:
        choice = choose_ridge(
            source, n, labels, folds=folds, seed=seed, n_components=n_components, subjects=subjects
        )
    outer = _OuterLoop(source, labels, n_components, given, folds, subjects)
    u, v = np.full((2, repeats, n, n_components), np.nan)
    ridges = np.empty((repeats, folds, 2))
    for repeat in range(repeats):
        drawn = np.random.SeedSequence(seed, spawn_key=(repeat,))
        for k, (train, test) in enumerate(make_folds(labels, subjects, n, folds, drawn)):
            inner = np.random.SeedSequence(seed, spawn_key=(repeat, k))
            ridges[repeat, k] = outer.score(train, test, inner, u[repeat], v[repeat])
            if progress is not None:
                progress(repeat * folds + k + 1, repeats * folds)
    _require_pairs(u)
    return _summary(u, v, ridges, choice)


@dataclass(frozen=True, eq=False)
class _OuterLoop:
    source: SplitSource
    labels: Labels
    n_components: int
    given: RidgePair | None
    folds: int
    subjects: IndexArray | None = None

    def score(
        self, train: IndexArray, test: IndexArray, seed: Seed, u: FloatArray, v: FloatArray
    ) -> RidgePair:
        """Fill the test samples' rows of ``u`` and ``v`` (n_samples x pairs); return the ridge used."""
        used = self.given or self._choose(train, seed)
        fold = decompose_split(self.source(train, test))
        scores = score_fold(fold, used, self.n_components)
        cells = np.ix_(test[fold.scored], np.arange(scores.x_test.shape[1]))
        u[cells], v[cells] = scores.x_test, scores.y_test
        return used

    def _choose(self, train: IndexArray, seed: Seed) -> RidgePair:
        def inside(inner_train: IndexArray, inner_test: IndexArray) -> Split:
            return self.source(train[inner_train], train[inner_test])

        labels = None if self.labels is None else self.labels[train]
        choice = choose_ridge(
            inside,
            train.size,
            labels,
            folds=self.folds,
            seed=seed,
            n_components=self.n_components,
            subjects=None if self.subjects is None else self.subjects[train],
        )
        return choice.multiples


def _require_pairs(u: FloatArray) -> None:
    found = int(np.isfinite(u).any(axis=(0, 1)).sum())
    if found < u.shape[2]:
        raise NumericsError(
            f"asked for {u.shape[2]} canonical pairs, the training parts of the folds support {found}, because "
            f"no part has a higher rank on both sides; ask for at most {found}"
            if found
            else "no sample can be scored out of fold: each has a nuisance level that its training part lacks; "
            "remove fewer nuisance columns"
        )


def _summary(u: FloatArray, v: FloatArray, ridges: FloatArray, choice: RidgeChoice | None) -> CrossValidation:
    repeats, _, n_components = u.shape
    by_repeat, errors = pooled_score(np.moveaxis(u, 1, 2)[..., None], np.moveaxis(v, 1, 2)[..., None])
    return CrossValidation(
        correlations=by_repeat.mean(axis=0),
        standard_errors=errors.mean(axis=0),
        by_repeat=by_repeat,
        ridges=ridges,
        choice=choice,
        n_scored=np.isfinite(u).any(axis=2).sum(axis=1),
        n_components=n_components,
        folds=ridges.shape[1],
        repeats=repeats,
    )
