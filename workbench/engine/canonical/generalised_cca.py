"""Generalised canonical correlation of several blocks, as a scikit-learn estimator."""

from __future__ import annotations

from collections.abc import Sequence
from numbers import Real
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray
from sklearn.base import BaseEstimator, ClassNamePrefixFeaturesOutMixin, TransformerMixin
from sklearn.utils import check_random_state
from sklearn.utils.validation import check_is_fitted, validate_data

from workbench.engine.canonical.canonical import is_auto
from workbench.engine.canonical.generalised_blocks import StandardBlock, held_rows, standard_blocks
from workbench.engine.canonical.generalised_components import (
    GeneralisedComponents,
    generalised_components,
    mean_over,
)
from workbench.engine.canonical.generalised_correlations import mean_over_pairs, pair_correlations
from workbench.engine.canonical.generalised_validation import (
    GeneralisedRidge,
    blocks_source,
    choose_common_ridge,
)
from workbench.engine.linear import column_correlations, component_signs
from workbench.engine.sides import block_slices
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


class GeneralisedCCA(ClassNamePrefixFeaturesOutMixin, TransformerMixin, BaseEstimator):  # type: ignore[misc]
    """Components that several blocks share, whatever their numbers of features, also where blocks lack samples.

    Solved in sample space, see :mod:`workbench.engine.canonical.generalised_components`. Correlations in sample are
    high whenever features are many: read them beside those of
    :func:`~workbench.engine.canonical.generalised_validation.cross_validated_components` and the p of
    :func:`~workbench.engine.canonical.generalised_permutation.generalised_pair_test`.

    Parameters
    ----------
    n_components : int, default 2
        At least 1; more than the data support are refused with the reason.
    ridge : "auto", float or sequence of float, default "auto"
        Ridge of all blocks, or of each, in multiples of the block's noise level (the median nonzero eigenvalue of
        ``XX'``); 0 = none, refused for a block of ``n - c`` features or more. "auto" chooses one multiple for all
        by cross-validation.
    block_sizes : sequence of int or None, default None
        Features of each block, in the order of the columns; None: one block, whose components are its principal
        components. With sizes, a row of a block may be missing as a whole (NaN): a sample that the block lacks.
    folds : int, default 5
        Folds of the choice of ridge.
    random_state : int, RandomState or None, default None
        Draws those folds.
    nuisance_rank : int, default 1
        Dimensions that have been removed beforehand, the intercept counted. Above 1 the ridge must be given.
    part_sizes : sequence of (sequence of int or None), or None, default None
        Features of each part of each block, where a block is several tables of one layer; parts are brought to
        equal total variance.

    Attributes
    ----------
    n_components_ : int
    roots_ : ndarray of shape (n_components,)
        Eigenvalues; 1 where nothing is shared, the number of blocks where all blocks have the component.
    scores_ : ndarray of shape (n_samples, n_components)
        Components: the mean of the blocks' variates; NaN for a sample that no block has.
    variates_ : tuple of ndarray, each of shape (n_samples, n_components)
        Each block's own variate; NaN for a sample that it lacks.
    weights_ : ndarray of shape (n_features, n_components)
        Weights of standardised features for their block's variate; 0 for a constant one.
    correlations_ : ndarray of shape (n_components,)
        In-sample correlation of two blocks' variates, mean over the pairs of blocks.
    pair_correlations_ : ndarray of shape (n_components, n_blocks, n_blocks)
        The same for each pair, on the samples that both have.
    own_correlations_, other_correlations_ : ndarray of shape (n_features, n_components)
        Correlation of each feature with its own block's variate, and with the mean of the other blocks'; NaN for a
        constant one.
    explained_ : ndarray of shape (n_components, n_blocks)
        Share of a block's variance that its own variate explains beyond those before it.
    ridge_, ridge_multiples_, noise_level_ : ndarray of shape (n_blocks,)
        Absolute penalties, their multiples, and the noise levels.
    ridge_choice_ : GeneralisedRidge or None
    mean_, scale_ : ndarray of shape (n_features,)
    kept_ : ndarray of bool, shape (n_features,)
        Features that vary.
    n_features_in_ : int

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> shared = rng.normal(size=(40, 1))
    >>> x = shared + rng.normal(size=(40, 300))
    >>> x[:8, 200:] = np.nan  # the third block lacks eight samples
    >>> gcca = GeneralisedCCA(1, ridge=1.0, block_sizes=(100, 100, 100)).fit(x)
    >>> bool(abs(np.corrcoef(gcca.scores_[:, 0], shared[:, 0])[0, 1]) > 0.98)
    True
    """

    def __init__(
        self,
        n_components: int = 2,
        *,
        ridge: str | float | Sequence[float] = "auto",
        block_sizes: Sequence[int] | None = None,
        folds: int = 5,
        random_state: int | np.random.RandomState | None = None,
        nuisance_rank: int = 1,
        part_sizes: Sequence[Sequence[int] | None] | None = None,
    ) -> None:
        self.n_components = n_components
        self.ridge = ridge
        self.block_sizes = block_sizes
        self.folds = folds
        self.random_state = random_state
        self.nuisance_rank = nuisance_rank
        self.part_sizes = part_sizes

    def fit(self, X: ArrayLike, y: object = None) -> Self:  # noqa: ARG002
        """Find the components of the blocks that stand side by side in ``X``; ``y`` is not used.

        Raises
        ------
        NumericsError
            When more components are asked for than the data support, a block has no variation, or no ridge is
            asked for where it cannot be done without.
        """
        x = self._validated(X, reset=True)
        for name in ("n_components", "nuisance_rank"):
            value = getattr(self, name)
            if not isinstance(value, (int, np.integer)) or isinstance(value, bool) or value < 1:
                raise NumericsError(f"{name} is {value!r}; allowed: a whole number of at least 1")
        self.slices_ = block_slices(self.block_sizes, x.shape[1], "of the blocks")
        raw = [x[:, inside] for inside in self.slices_]
        parts: list[Sequence[int] | None] = list(self.part_sizes or [None] * len(raw))
        self.ridge_multiples_ = self._choose_multiples(raw, parts)
        blocks = standard_blocks(raw, parts, self.nuisance_rank)
        self._check_unridged(blocks)
        self.noise_level_ = np.array([block.placed.basis.noise_level for block in blocks])
        self.ridge_ = self.ridge_multiples_ * self.noise_level_
        placed = [block.placed for block in blocks]
        found = generalised_components(placed, self.ridge_.tolist(), self.n_components)
        self.n_components_ = self._n_features_out = self.n_components
        self._store(blocks, found)
        return self

    def transform(self, X: ArrayLike) -> FloatArray:
        """Return the components of any samples: the mean of the variates of the blocks that they have."""
        return mean_over(self.block_variates(X))

    def block_variates(self, X: ArrayLike) -> tuple[FloatArray, ...]:
        """Return each block's variates of any samples, each (n_samples, n_components); NaN where a block lacks one."""
        check_is_fitted(self)
        x = self._validated(X, reset=False)
        scaled = (x - self.mean_) / self.scale_
        return tuple(scaled[:, inside] @ self.weights_[inside] for inside in self.slices_)

    def _validated(self, X: ArrayLike, reset: bool) -> FloatArray:
        finite = True if self.block_sizes is None else "allow-nan"
        x: FloatArray = validate_data(
            self,
            X,
            dtype=np.float64,
            reset=reset,
            ensure_all_finite=finite,
            ensure_min_samples=2 if reset else 1,
        )
        if not reset:
            for inside in self.slices_:
                if np.isnan(x[:, inside]).any(axis=1).sum() != np.isnan(x[:, inside]).all(axis=1).sum():
                    raise NumericsError(
                        "a sample lacks some features of a block; fill them, or all of them lack"
                    )
        return x

    def _choose_multiples(self, raw: list[FloatArray], parts: list[Sequence[int] | None]) -> FloatArray:
        self.ridge_choice_: GeneralisedRidge | None = None
        if not is_auto(self.ridge):
            return check_ridges(self.ridge, len(raw))
        if self.nuisance_rank > 1:
            raise NumericsError(
                f"ridge 'auto' with nuisance_rank {self.nuisance_rank}: the nuisance was removed with all "
                "samples, so that held-out ones are not held out; choose with choose_common_ridge and give it"
            )
        if len(raw) == 1:
            return np.ones(1)
        for k, block in enumerate(raw):
            held_rows(block, str(k + 1))
        seed = int(check_random_state(self.random_state).randint(2**31 - 1))
        self.ridge_choice_ = choose_common_ridge(
            blocks_source(raw, part_sizes=parts),
            raw[0].shape[0],
            folds=self.folds,
            seed=seed,
            n_components=self.n_components,
        )
        return np.full(len(raw), self.ridge_choice_.multiple)

    def _check_unridged(self, blocks: Sequence[StandardBlock]) -> None:
        free = []
        for k, (multiple, block) in enumerate(zip(self.ridge_multiples_, blocks, strict=True)):
            basis, freedom = block.placed.basis, block.placed.rows.size - self.nuisance_rank
            if multiple == 0.0:
                free.append(basis.rank)
            if multiple == 0.0 and basis.n_features >= freedom and len(blocks) > 1:
                raise NumericsError(
                    f"ridge 0 (none) for block {k + 1} with {basis.n_features} features and {freedom} degrees of "
                    "freedom: so many features fit any variate perfectly; give a ridge above 0, or 'auto'"
                )
        room = blocks[0].placed.n - self.nuisance_rank
        if len(free) > 1 and sum(sorted(free)[-2:]) > room:
            raise NumericsError(
                f"ridge 0 (none) for blocks of ranks {sorted(free)[-2:]} and {room} degrees of freedom: together the "
                "ranks exceed it, and a correlation of 1 is certain; give a ridge above 0, or 'auto'"
            )

    def _store(self, blocks: Sequence[StandardBlock], found: GeneralisedComponents) -> None:
        """Keep the components, signed by the one rule, and what they say about the features."""
        own = [
            column_correlations(block.side.values, variate[block.placed.rows])
            for block, variate in zip(blocks, found.variates, strict=True)
        ]
        signs = component_signs(*own)
        self.roots_ = found.roots
        self.variates_ = tuple(variate * signs for variate in found.variates)
        self.scores_ = mean_over(self.variates_)
        self.mean_ = np.concatenate([block.side.mean for block in blocks])
        self.scale_ = np.concatenate([block.side.scale for block in blocks])
        self.kept_ = np.concatenate([block.side.varies for block in blocks])
        every = (self.kept_.size, self.n_components_)
        self.weights_, self.own_correlations_ = np.zeros(every), np.full(every, np.nan)
        self.other_correlations_ = np.full(every, np.nan)
        self.explained_ = np.zeros((self.n_components_, len(blocks)))
        for k, (block, dual, inside) in enumerate(zip(blocks, found.duals, self.slices_, strict=True)):
            places = np.flatnonzero(block.side.varies) + inside.start
            self.weights_[places] = block.side.values.T @ (dual * signs)
            self.own_correlations_[places] = own[k] * signs
            self.other_correlations_[places] = _with_others(block, k, self.variates_)
            steps = np.linalg.qr(self.variates_[k][block.placed.rows])[0]
            self.explained_[:, k] = (column_correlations(block.side.values, steps) ** 2).mean(axis=0)
        self.pair_correlations_ = pair_correlations(self.variates_)
        self.correlations_ = mean_over_pairs(self.pair_correlations_)

    def __sklearn_tags__(self) -> Any:
        """Return the tags of scikit-learn: rows of a block may be missing once its size is told."""
        tags = super().__sklearn_tags__()
        tags.input_tags.allow_nan = self.block_sizes is not None
        return tags


def check_ridges(ridge: object, n_blocks: int) -> FloatArray:
    """One ridge for each block from one number or as many as blocks, shape (n_blocks,).

    Raises
    ------
    NumericsError
        When it is neither, or a number is negative or not finite.
    """
    every = list(ridge) if isinstance(ridge, (tuple, list, np.ndarray)) else [ridge] * n_blocks
    numbers = [float(v) for v in every if isinstance(v, Real) and not isinstance(v, (bool, np.bool_))]
    if len(every) != n_blocks or len(numbers) != n_blocks or not all(0.0 <= v < np.inf for v in numbers):
        raise NumericsError(
            f"ridge is {ridge!r}; allowed: 'auto', one number of at least 0, or {n_blocks} of them (one for each "
            "block), in multiples of the block's noise level; 0 = none"
        )
    return np.array(numbers)


def _with_others(block: StandardBlock, k: int, variates: Sequence[FloatArray]) -> FloatArray:
    """Correlation of a block's features with the mean of the other blocks' variates, where any other has a sample."""
    rows = block.placed.rows
    others = [variate[rows] for j, variate in enumerate(variates) if j != k]
    if not others:
        return np.full((block.side.values.shape[1], variates[0].shape[1]), np.nan)
    mean = mean_over(others)
    known = np.isfinite(mean[:, 0])
    values = block.side.values[known]
    return column_correlations(values - values.mean(axis=0), mean[known] - mean[known].mean(axis=0))
