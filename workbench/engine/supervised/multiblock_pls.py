"""Multi-block partial least squares, as scikit-learn estimators: a regression and a discriminant form."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray
from sklearn.base import (
    BaseEstimator,
    ClassifierMixin,
    ClassNamePrefixFeaturesOutMixin,
    RegressorMixin,
    TransformerMixin,
)
from sklearn.utils import check_array, check_consistent_length
from sklearn.utils.multiclass import check_classification_targets
from sklearn.utils.validation import check_is_fitted, column_or_1d, validate_data

from workbench.engine.linear import component_signs
from workbench.engine.supervised.multiblock_blocks import blocks_present, fit_scaling
from workbench.engine.supervised.multiblock_kernel import (
    KernelComponents,
    batch_predictions,
    centred_kernels,
    kernel_components,
    kernel_products,
)
from workbench.engine.supervised.outcome_coding import balanced_codes
from workbench.engine.supervised.outcome_rule import learn_rule
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

CUT_FOLDS = 5
CUT_SAMPLES = 2000
"""Samples up to which the cut between classes is learnt from samples held out."""


class _MultiblockModel(ClassNamePrefixFeaturesOutMixin, TransformerMixin, BaseEstimator):  # type: ignore[misc]
    """What both forms share: components, what they say of blocks and features, scores of new samples."""

    def __init__(
        self, n_components: int = 2, *, block_sizes: Sequence[int] | None = None, alike: str = "blocks"
    ) -> None:
        self.n_components = n_components
        self.block_sizes = block_sizes
        self.alike = alike

    def transform(self, X: ArrayLike) -> FloatArray:
        """Super scores of any samples; a block that a sample lacks stands at its training mean.

        Parameters
        ----------
        X : array of shape (n_samples, n_features)
            A lacking block is NaN in all of its columns.
        """
        values, _ = self._check_new(X)
        scores: FloatArray = values @ self.x_rotations_
        return scores

    def block_scores(self, X: ArrayLike) -> FloatArray:
        """Part of the super scores that each block adds, shape (n_blocks, n_samples, n_components).

        They add up to :meth:`transform`.
        """
        values, _ = self._check_new(X)
        return np.array([values[:, block] @ self.x_rotations_[block] for block in self._scaling.blocks])

    def _fit_components(self, X: ArrayLike, y: FloatArray) -> None:
        """Find the components of centred outcomes and read the features; ``X`` was checked."""
        x = np.asarray(X, dtype=np.float64)
        self._scaling = fit_scaling(x, self.block_sizes, self.alike)
        self._training = self._scaling.standardised(x)
        self._outcomes = y
        count = self.n_components
        if not isinstance(count, (int, np.integer)) or isinstance(count, bool) or count < 1:
            raise NumericsError(f"n_components is {count!r}; allowed: a whole number of at least 1")
        most = min(x.shape[0] - 1, int(np.count_nonzero(self._scaling.varies)))
        if count > most:
            raise NumericsError(
                f"asked for {count} components with n_samples={x.shape[0]} and n_features={x.shape[1]}, "
                f"{np.count_nonzero(self._scaling.varies)} of which vary; ask for at most {most}"
            )
        found = _components(self._training, y, int(count))
        self.n_components_ = self._n_features_out = found.lengths.size
        self._dual_cache: dict[tuple[bool, ...], FloatArray] = {}
        self._store(found)

    def _store(self, found: KernelComponents) -> None:
        x, blocks = self._training, self._scaling.blocks
        columns = np.hstack([found.duals, found.scores, found.rotations, found.coefficients])
        products = x.T @ columns
        count = found.lengths.size
        weights, along = products[:, :count], products[:, count : 2 * count]
        signs = component_signs(along)
        self.x_weights_, self.x_loadings_ = weights * signs, along / found.lengths * signs
        self.x_rotations_ = products[:, 2 * count : 3 * count] * signs
        self.x_scores_ = found.scores * found.lengths * signs
        self.y_weights_, self.y_loadings_ = found.y_weights * signs, found.y_loadings / found.lengths * signs
        self.block_importance_ = np.array([(weights[block] ** 2).sum(axis=0) for block in blocks]).T
        total = np.array([np.vdot(x[:, block], x[:, block]) for block in blocks])
        shares = np.array([(along[block] ** 2).sum(axis=0) for block in blocks]).T
        self.x_explained_ = np.divide(shares, total, out=np.full(shares.shape, np.nan), where=total > 0.0)
        of_outcomes = (found.y_loadings**2).sum(axis=0)
        self.y_explained_ = of_outcomes / (self._outcomes**2).sum()
        self.vip_ = np.full(x.shape[1], np.nan)
        varies = self._scaling.varies
        parts = (weights[varies] / self._scaling.weights[varies, None]) ** 2
        shares_of_features = (parts / parts.sum(axis=0)) @ (of_outcomes / of_outcomes.sum())
        self.vip_[varies] = np.sqrt(np.count_nonzero(varies) * shares_of_features)
        self.block_weights_, self.train_block_scores_ = self._block_parts(found)
        self.x_mean_, self.x_scale_, self.x_kept_ = self._scaling.mean, self._scaling.scale, varies
        self.lacking_ = self._scaling.lacking
        self._coefficients = products[:, 3 * count :]

    def _block_parts(self, found: KernelComponents) -> tuple[FloatArray, FloatArray]:
        """Block weights of length 1, and the block scores that they give after the earlier super scores."""
        weights = np.zeros_like(self.x_weights_)
        scores = np.zeros((len(self._scaling.blocks), *found.scores.shape))
        for b, block in enumerate(self._scaling.blocks):
            length = np.linalg.norm(self.x_weights_[block], axis=0)
            weights[block] = np.divide(
                self.x_weights_[block], length, out=np.zeros_like(weights[block]), where=length > 0.0
            )
            raw = self._training[:, block] @ weights[block]
            for a in range(found.lengths.size):
                before = found.scores[:, :a]
                scores[b, :, a] = raw[:, a] - before @ (before.T @ raw[:, a])
        return weights, scores

    def _check_new(self, X: ArrayLike) -> tuple[FloatArray, NDArray[np.bool_]]:
        check_is_fitted(self)
        x = validate_data(self, X, dtype=np.float64, reset=False, ensure_all_finite="allow-nan")
        present = blocks_present(x, self._scaling.blocks)
        return self._scaling.standardised(x), present

    def _predicted(self, X: ArrayLike) -> FloatArray:
        """Centred outcomes of new samples, each by the model of the blocks that it has."""
        values, present = self._check_new(X)
        predicted = np.empty((values.shape[0], self._outcomes.shape[1]))
        for pattern in np.unique(present, axis=0):
            rows = (present == pattern).all(axis=1)
            predicted[rows] = values[rows] @ self._coefficients_of(tuple(pattern.tolist()))
        return predicted

    def _coefficients_of(self, pattern: tuple[bool, ...]) -> FloatArray:
        if all(pattern):
            return self._coefficients
        if pattern not in self._dual_cache:
            held = np.zeros(self._training.shape[1], dtype=bool)
            for has, block in zip(pattern, self._scaling.blocks, strict=True):
                held[block] = has
            coefficients = np.zeros((held.size, self._outcomes.shape[1]))
            part = self._training[:, held]
            coefficients[held] = part.T @ _most_components(part, self._outcomes, self.n_components_)
            self._dual_cache[pattern] = coefficients
        return self._dual_cache[pattern]


class MultiblockPLS(RegressorMixin, _MultiblockModel):  # type: ignore[misc]
    """Regression of one or several outcomes on one or several blocks of features.

    Features are centred and scaled to unit variance, blocks to equal total variance; super scores are
    deflated (Westerhuis & Smilde 2001), so that they are those of ordinary PLS on the blocks side by side.
    Computed in sample space, see :mod:`workbench.engine.supervised.multiblock_kernel`. In-sample fit of more features
    than samples says nothing about other samples: read it beside :func:`double_validation`.

    A sample that lacks a block (NaN in all of its columns) takes part in the fit with that block at its
    mean, and is predicted by the model of the blocks that it has, fitted on the same training samples with
    as many components as that model supports, up to ``n_components``. Its super scores have the block at
    its training mean, and are so drawn towards 0.

    Parameters
    ----------
    n_components : int, default 2
        At least 1; more than there are features or samples less one are refused.
    block_sizes : sequence of int or None, default None
        Features of each block, in the order of the columns; ``None``: one block.
    alike : {"blocks", "features"}, default "blocks"
        What weighs alike: every block, whatever its number of features, or every feature.

    Attributes
    ----------
    n_components_ : int
        Components found: fewer than asked for where they explain the outcomes in full, or where nothing that
        is left in the features goes with what is left of the outcomes.
    x_scores_ : ndarray of shape (n_samples, n_components)
        Super scores ``t``.
    block_weights_ : ndarray of shape (n_features, n_components)
        Weights of length 1 within each block.
    train_block_scores_ : ndarray of shape (n_blocks, n_samples, n_components)
        Block scores ``t_b``, after the earlier super scores: ``t = sum_b sqrt(importance_b) t_b``.
    block_importance_ : ndarray of shape (n_components, n_blocks)
        Squared super weights; each row adds up to 1.
    x_weights_, x_loadings_, x_rotations_ : ndarray of shape (n_features, n_components)
        For standardised features; 0 for a constant one.
    y_weights_, y_loadings_ : ndarray of shape (n_outcomes, n_components)
    x_explained_ : ndarray of shape (n_components, n_blocks)
        Share of each block's variance that a super score explains.
    y_explained_ : ndarray of shape (n_components,)
        Share of the outcomes' variance, in sample; several outcomes weigh alike.
    vip_ : ndarray of shape (n_features,)
        Variable importance in projection: its mean square over the features is 1; NaN for a constant one.
        Features count by their own covariance, at unit variance: one in a block of few is not important for
        its block's weight alone. With one block it is the usual figure.
    coef_ : ndarray of shape (n_outcomes, n_features)
    intercept_ : ndarray of shape (n_outcomes,)
        ``y = X coef' + intercept`` for features as given.
    x_mean_, x_scale_, x_kept_ : ndarray of shape (n_features,)
        What standardising subtracts and divides by (block weight included), and which features vary.
    lacking_ : tuple of int
        Training samples that lack each block.
    n_features_in_ : int

    References
    ----------
    Westerhuis, Kourti & MacGregor 1998, J Chemometrics 12:301. Westerhuis & Smilde 2001, J Chemometrics
    15:485. Rannar et al. 1994, J Chemometrics 8:111. Wold, Sjostrom & Eriksson 2001, Chemometrics and
    Intelligent Laboratory Systems 58:109 (variable importance).

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> factor = rng.normal(size=60)
    >>> x = rng.normal(size=(60, 300))
    >>> x[:, 200:240] += factor[:, None]
    >>> pls = MultiblockPLS(1, block_sizes=[200, 100]).fit(x[:40], factor[:40])
    >>> bool(pls.score(x[40:], factor[40:]) > 0.6), bool(pls.block_importance_[0, 1] > 0.6)
    (True, True)
    """

    def fit(self, X: ArrayLike, y: ArrayLike | None) -> Self:
        """Find the components that the outcomes draw from the blocks.

        Parameters
        ----------
        X : array of shape (n_samples, n_features)
        y : array of shape (n_samples,) or (n_samples, n_outcomes)
            For another block as outcome give its features.

        Raises
        ------
        NumericsError
            When more components are asked for than features or samples allow, the outcome does not vary, or a
            block has missing values in a part of its features.
        """
        if y is None:
            raise NumericsError("MultiblockPLS requires y to be passed, but the target y is None")
        x = validate_data(self, X, dtype=np.float64, ensure_min_samples=2, ensure_all_finite="allow-nan")
        outcomes = check_array(y, dtype=np.float64, ensure_2d=False, input_name="y")
        check_consistent_length(x, outcomes)
        self._one_outcome = outcomes.ndim == 1
        outcomes = outcomes[:, None] if self._one_outcome else outcomes
        mean = outcomes.mean(axis=0)
        deviation = (outcomes - mean).std(axis=0, ddof=1)
        self._y_scale = np.where(deviation > 0.0, deviation, 1.0)
        self._fit_components(x, (outcomes - mean) / self._y_scale)
        self.coef_ = (self._coefficients * self._y_scale / self.x_scale_[:, None]).T
        self.intercept_ = mean - self.coef_ @ self.x_mean_
        self._y_mean = mean
        return self

    def predict(self, X: ArrayLike) -> FloatArray:
        """Outcomes of any samples, each by the model of the blocks that it has.

        Parameters
        ----------
        X : array of shape (n_samples, n_features)
        """
        predicted: FloatArray = self._predicted(X) * self._y_scale + self._y_mean
        return predicted[:, 0] if self._one_outcome else predicted

    def __sklearn_tags__(self) -> Any:
        """Return the tags of scikit-learn."""
        tags = super().__sklearn_tags__()
        tags.target_tags.required = True
        tags.target_tags.multi_output = True
        tags.target_tags.single_output = True
        return tags


class MultiblockDiscriminant(ClassifierMixin, _MultiblockModel):  # type: ignore[misc]
    """Classes told apart by one or several blocks of features: the discriminant form, priors balanced.

    The components follow the distances of the class means from their unweighted mean, so that a rare class
    counts as much as a frequent one (Barker & Rayens 2003). Classes are told from the predicted codes by linear
    discrimination with equal priors. Its cut and its slope are learnt from samples held out in five folds (up
    to 2,000 samples, two of each class at least; else from the fit itself): with more features than samples
    the fit's own codes are too far apart, and the smaller class's are the further by noise alone.

    Parameters and the attributes that are not named here are those of :class:`MultiblockPLS`.

    Attributes
    ----------
    classes_ : ndarray of shape (n_classes,)
        In order; the first is the reference of a decision between two.
    coef_ : ndarray of shape (1 or n_classes, n_features)
        Of the predicted codes (one column for two classes), for features less ``x_mean_``.

    References
    ----------
    Barker & Rayens 2003, J Chemometrics 17:166.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> ill = np.repeat([0, 1], 20)
    >>> x = rng.normal(size=(40, 200)) + np.outer(ill, np.arange(200) < 20)
    >>> float(MultiblockDiscriminant(1, block_sizes=[100, 100]).fit(x[::2], ill[::2]).score(x[1::2], ill[1::2]))
    1.0
    """

    def fit(self, X: ArrayLike, y: ArrayLike | None) -> Self:
        """Find the components that tell the classes apart.

        Parameters
        ----------
        X : array of shape (n_samples, n_features)
        y : array of shape (n_samples,)

        Raises
        ------
        NumericsError
            When there is one class, more components are asked for than features or samples allow, or a
            block has missing values in a part of its features.
        """
        if y is None:
            raise NumericsError("MultiblockDiscriminant requires y to be passed, but the target y is None")
        x = validate_data(self, X, dtype=np.float64, ensure_min_samples=2, ensure_all_finite="allow-nan")
        labels = column_or_1d(check_array(y, dtype=None, ensure_2d=False, input_name="y"), warn=True)
        check_consistent_length(x, labels)
        check_classification_targets(labels)
        self.classes_, codes = np.unique(labels, return_inverse=True)
        if self.classes_.size < 2:
            raise NumericsError(
                f"the outcome has 1 class ({self.classes_[0]}); two classes are the least: add samples of another"
            )
        self._fit_components(x, balanced_codes(codes[:, None], self.classes_.size)[:, :, 0])
        self.coef_ = (self._coefficients / self.x_scale_[:, None]).T
        self._cut(codes)
        return self

    def decision_function(self, X: ArrayLike) -> FloatArray:
        """How much nearer to each class; for two classes one column, positive for the second.

        Parameters
        ----------
        X : array of shape (n_samples, n_features)
        """
        values = self._predicted(X)
        decision = self._rule.decision(values)
        return decision[:, 0] if self.classes_.size == 2 else decision

    def predict_proba(self, X: ArrayLike) -> FloatArray:
        """Probability of each class if all were equally frequent, shape (n_samples, n_classes).

        Parameters
        ----------
        X : array of shape (n_samples, n_features)
        """
        values = self._predicted(X)
        return self._rule.probabilities(values)

    def predict(self, X: ArrayLike) -> Any:
        """Class of any samples, each by the model of the blocks that it has.

        Parameters
        ----------
        X : array of shape (n_samples, n_features)
        """
        values = self._predicted(X)
        return self.classes_[self._rule.classes(values)]

    def _cut(self, codes: NDArray[np.intp]) -> None:
        """Learn what each class's value must pass, from samples held out where they are not very many."""
        n_classes = self.classes_.size
        if codes.size <= CUT_SAMPLES and np.bincount(codes).min() >= 2:
            values = _held_out_codes(self._training, codes, n_classes, self.n_components_)
        else:
            values = self._training @ self._coefficients
        self._rule = learn_rule(values, codes, n_classes)

    def __sklearn_tags__(self) -> Any:
        """Return the tags of scikit-learn."""
        tags = super().__sklearn_tags__()
        tags.target_tags.required = True
        return tags


def _components(x: FloatArray, y: FloatArray, n_components: int) -> KernelComponents:
    """Components of centred outcomes; more outcomes than samples are turned into coordinates first."""
    if y.shape[1] <= y.shape[0]:
        return kernel_components(kernel_products(x), y, n_components)
    u, lengths, directions = np.linalg.svd(y, full_matrices=False)
    found = kernel_components(kernel_products(x), u * lengths, n_components)
    turned = directions.T
    return KernelComponents(
        found.scores,
        found.lengths,
        found.duals,
        found.rotations,
        turned @ found.y_weights,
        turned @ found.y_loadings,
    )


def _most_components(x: FloatArray, y: FloatArray, n_components: int) -> FloatArray:
    """Duals of the regression on a part of the blocks; 0 where they have nothing that goes with the outcomes."""
    try:
        return _components(x, y, n_components).coefficients
    except NumericsError:
        return np.zeros((x.shape[0], y.shape[1]))


def _held_out_codes(x: FloatArray, codes: NDArray[np.intp], n_classes: int, n_components: int) -> FloatArray:
    """Predicted codes of every sample by a model of the other folds; each class is dealt out to the folds in turn."""
    kernel = x @ x.T
    place = np.array([np.count_nonzero(codes[:i] == code) for i, code in enumerate(codes)])
    predicted = np.empty((codes.size, 1 if n_classes == 2 else n_classes))
    for fold in range(CUT_FOLDS):
        train, test = np.flatnonzero(place % CUT_FOLDS != fold), np.flatnonzero(place % CUT_FOLDS == fold)
        y = balanced_codes(codes[train, None], n_classes)
        predicted[test] = batch_predictions(*centred_kernels(kernel, train, test), y, n_components)[1][
            -1, :, :, 0
        ]
    return predicted
