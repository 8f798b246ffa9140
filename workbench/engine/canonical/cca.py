"""Ridge canonical correlation of two sides, as a scikit-learn estimator."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray
from sklearn.base import BaseEstimator, ClassNamePrefixFeaturesOutMixin, TransformerMixin
from sklearn.utils import check_array, check_consistent_length, check_random_state
from sklearn.utils.validation import check_is_fitted, validate_data

from workbench.engine.canonical.canonical import (
    CanonicalPairs,
    RidgePair,
    absolute_ridge,
    canonical_pairs,
    check_ridge,
    check_unridged,
    is_auto,
)
from workbench.engine.canonical.ridge_choice import RidgeChoice, choose_ridge
from workbench.engine.canonical.splits import array_source
from workbench.engine.linear import component_signs, thin_basis
from workbench.engine.sides import StandardSide, read_side, standard_side
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


class RegularisedCCA(ClassNamePrefixFeaturesOutMixin, TransformerMixin, BaseEstimator):  # type: ignore[misc]
    """Canonical pairs of two sides whose features may outnumber the samples.

    Finds weights ``a``, ``b`` with ``a'X'Yb`` greatest under
    ``a'(X'X + l_x I)a = b'(Y'Y + l_y I)b = 1``, pair after pair, on features centred and scaled to unit
    variance; solved in sample space, see :mod:`workbench.engine.canonical.canonical`. Missing values are refused.

    In-sample correlations of more features than samples say nothing about other samples: read
    ``correlations_`` beside those of :func:`cross_validated_correlations` and the p of
    :func:`canonical_pair_test`.

    Parameters
    ----------
    n_components : int, default 2
        Canonical pairs, at least 1; more than the data support are refused with the reason.
    ridge : "auto", float or pair of float, default "auto"
        Ridge of both sides, or of X and of Y, in multiples of the side's noise level (the median nonzero
        eigenvalue of ``XX'``); 0 = none, refused for a side of ``n - c`` features or more. "auto" chooses by
        :func:`choose_ridge`.
    folds : int, default 5
        Folds of the choice of ridge.
    random_state : int, RandomState or None, default None
        Draws those folds.
    nuisance_rank : int, default 1
        Dimensions ``c`` that have been removed from both sides beforehand, the intercept counted (give the
        values of :func:`standardise`, which drops features that the nuisance explains). Above 1 the ridge
        must be given: samples held out here would have been seen by the removal.
    x_block_sizes, y_block_sizes : sequence of int or None, default None
        Features of each block of a side of several blocks; they are brought to equal total variance.

    Attributes
    ----------
    n_components_ : int
        Canonical pairs found.
    correlations_ : ndarray of shape (n_components,)
        In-sample correlation of the two variates of each pair; with ridge not always falling.
    x_scores_, y_scores_ : ndarray of shape (n_samples, n_components)
        Variates ``u_k = X a_k`` and ``v_k = Y b_k`` (centred; length at most 1, and 1 without ridge).
    x_weights_, y_weights_ : ndarray of shape (n_features, n_components)
        Weights ``a_k``, ``b_k`` for standardised features; 0 for a constant one.
    x_correlations_, y_correlations_ : ndarray of shape (n_features, n_components)
        Correlation of each feature with its own side's variate; NaN for a constant one. Over both sides the
        greatest in size is positive.
    x_cross_correlations_, y_cross_correlations_ : ndarray of shape (n_features, n_components)
        Correlation of each feature with the other side's variate.
    y_loadings_ : ndarray of shape (n_components, q)
        Regression of the standardised features of Y on the ``v_k``; 0 for a constant one.
    x_explained_, y_explained_ : ndarray of shape (n_components, n_blocks)
        Share of a block's variance that the side's own variate explains beyond the variates before it.
    x_redundancy_, y_redundancy_ : ndarray of shape (n_components, n_blocks)
        The same by the other side's variates (Stewart & Love's redundancy).
    ridge_, ridge_multiples_, noise_level_ : pair of float
        Absolute penalties on ``XX'`` and ``YY'``, their multiples, and the noise levels.
    ridge_choice_ : RidgeChoice or None
        How "auto" came to them; None when the ridge was given.
    x_kept_, y_kept_ : ndarray of bool, shape (n_features,)
        Features that vary; the others are left out.
    x_mean_, y_mean_, x_scale_, y_scale_ : ndarray of shape (n_features,)
        What standardising subtracts and divides by (block weights included; 1 for a constant feature).
    n_features_in_ : int
        Features of X.

    References
    ----------
    Vinod 1976, Journal of Econometrics 4:147. Leurgans, Moyeed & Silverman 1993, JRSS B 55:725. Stewart &
    Love 1968, Psychological Bulletin 70:160.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> shared = rng.normal(size=(40, 1))
    >>> x, y = shared + rng.normal(size=(40, 200)), shared + rng.normal(size=(40, 80))
    >>> cca = RegularisedCCA(n_components=1, ridge=10.0).fit(x, y)
    >>> bool(abs(np.corrcoef(cca.x_scores_[:, 0], shared[:, 0])[0, 1]) > 0.95)
    True
    """

    def __init__(
        self,
        n_components: int = 2,
        *,
        ridge: str | float | tuple[float, float] = "auto",
        folds: int = 5,
        random_state: int | np.random.RandomState | None = None,
        nuisance_rank: int = 1,
        x_block_sizes: Sequence[int] | None = None,
        y_block_sizes: Sequence[int] | None = None,
    ) -> None:
        self.n_components = n_components
        self.ridge = ridge
        self.folds = folds
        self.random_state = random_state
        self.nuisance_rank = nuisance_rank
        self.x_block_sizes = x_block_sizes
        self.y_block_sizes = y_block_sizes

    def fit(self, X: ArrayLike, Y: ArrayLike | None) -> Self:
        """Find the canonical pairs of ``X`` and ``Y``.

        Parameters
        ----------
        X : array of shape (n_samples, p)
        Y : array of shape (n_samples, q) or (n_samples,)

        Raises
        ------
        NumericsError
            When more pairs are asked for than the data support, a side has no variation, or no ridge is
            asked for where it cannot be done without.
        """
        x, y = self._check_sides(X, Y)
        self.ridge_multiples_ = self._choose_multiples(x, y)
        x_side = standard_side(x, self.x_block_sizes, self.nuisance_rank, "X")
        y_side = standard_side(y, self.y_block_sizes, self.nuisance_rank, "Y")
        x_basis, y_basis = thin_basis(x_side.values), thin_basis(y_side.values)
        check_unridged(self.ridge_multiples_, x_basis, y_basis, x.shape[0] - self.nuisance_rank)
        self.noise_level_ = (x_basis.noise_level, y_basis.noise_level)
        self.ridge_ = absolute_ridge(self.ridge_multiples_, x_basis, y_basis)
        pairs = canonical_pairs(x_basis, y_basis, self.ridge_, self.n_components)
        self.n_components_ = self._n_features_out = self.n_components
        self._store(x_side, y_side, pairs)
        return self

    def transform(self, X: ArrayLike, Y: ArrayLike | None = None) -> Any:
        """Variates of any samples: ``x_scores``, and with ``Y`` the pair ``x_scores, y_scores``.

        Parameters
        ----------
        X : array of shape (n_samples, p)
        Y : array of shape (n_samples, q), optional
        """
        check_is_fitted(self)
        x = validate_data(self, X, dtype=np.float64, reset=False)
        x_scores = ((x - self.x_mean_) / self.x_scale_) @ self.x_weights_
        if Y is None:
            return x_scores
        y = _as_columns(check_array(Y, dtype=np.float64, ensure_2d=False, input_name="Y"))
        check_consistent_length(x, y)
        if y.shape[1] != self.y_mean_.size:
            raise NumericsError(
                f"Y has {y.shape[1]} features and the fit had {self.y_mean_.size}; give the same features in "
                "the same order"
            )
        return x_scores, ((y - self.y_mean_) / self.y_scale_) @ self.y_weights_

    def predict(self, X: ArrayLike, correlations: ArrayLike | None = None) -> FloatArray:
        """Return the other side's features of any samples as their variates of ``X`` predict them, (n_samples, q).

        ``v_k`` is predicted as ``r_k u_k sd(v_k) / sd(u_k)`` and the features by their regression on the ``v_k``.
        Without ridge and with as many pairs as Y has features this is least squares.

        Parameters
        ----------
        X : array of shape (n_samples, p)
        correlations : array of shape (n_components,), optional
            The ``r_k``; give those out of sample (:func:`cross_validated_correlations`), negative ones as 0. Left
            out, those in sample, with which predictions of many features are far too bold.
        """
        u = self.transform(X)
        r = self._pair_correlations(correlations)
        spreads = np.linalg.norm(self.y_scores_, axis=0) / np.linalg.norm(self.x_scores_, axis=0)
        predicted: FloatArray = self.y_mean_ + self.y_scale_ * ((u * r * spreads) @ self.y_loadings_)
        return predicted

    def implied_correlations(
        self,
        x_features: NDArray[np.intp],
        y_features: NDArray[np.intp],
        correlations: ArrayLike | None = None,
    ) -> FloatArray:
        """Return ``sum_k corr(x, u_k) r_k corr(y, v_k)`` of pairs of features: what the pairs say of their correlation.

        Parameters
        ----------
        x_features, y_features : ndarray of int, shape (n,)
            Columns of X and of Y, pair by pair.
        correlations : array of shape (n_components,), optional
            The ``r_k``, as in :meth:`predict`.
        """
        check_is_fitted(self)
        r = self._pair_correlations(correlations)
        implied: FloatArray = np.sum(
            self.x_correlations_[x_features] * r * self.y_correlations_[y_features], axis=1
        )
        return implied

    def _pair_correlations(self, correlations: ArrayLike | None) -> FloatArray:
        r = self.correlations_ if correlations is None else np.asarray(correlations, dtype=np.float64)
        if r.shape != (self.n_components_,) or not (np.abs(r) <= 1.0).all():
            raise NumericsError(
                f"correlations of shape {r.shape}; give one between -1 and 1 for each of the {self.n_components_} pairs"
            )
        return np.maximum(r, 0.0)

    def _check_sides(self, X: ArrayLike, Y: ArrayLike | None) -> tuple[FloatArray, FloatArray]:
        if Y is None:
            raise NumericsError(
                "RegularisedCCA requires y to be passed, but the target y is None; give the other side's features"
            )
        x = validate_data(self, X, dtype=np.float64, ensure_min_samples=2)
        y = _as_columns(check_array(Y, dtype=np.float64, ensure_2d=False, input_name="Y"))
        check_consistent_length(x, y)
        for name in ("n_components", "nuisance_rank"):
            value = getattr(self, name)
            if not isinstance(value, (int, np.integer)) or isinstance(value, bool) or value < 1:
                raise NumericsError(f"{name} is {value!r}; allowed: a whole number of at least 1")
        return x, y

    def _choose_multiples(self, x: FloatArray, y: FloatArray) -> RidgePair:
        self.ridge_choice_: RidgeChoice | None = None
        if not is_auto(self.ridge):
            return check_ridge(self.ridge)
        if self.nuisance_rank > 1:
            raise NumericsError(
                f"ridge 'auto' with nuisance_rank {self.nuisance_rank}: the nuisance was removed with all "
                "samples, so that held-out ones are not held out; choose with choose_ridge and give its multiples"
            )
        seed = int(check_random_state(self.random_state).randint(2**31 - 1))
        source = array_source(x, y, x_block_sizes=self.x_block_sizes, y_block_sizes=self.y_block_sizes)
        self.ridge_choice_ = choose_ridge(
            source, x.shape[0], folds=self.folds, seed=seed, n_components=self.n_components
        )
        return self.ridge_choice_.multiples

    def _store(self, x: StandardSide, y: StandardSide, pairs: CanonicalPairs) -> None:
        """Keep the pairs, signed by the one rule, and what they say about the features."""
        x_reading = read_side(x, pairs.x_duals, pairs.x_scores, pairs.y_scores)
        y_reading = read_side(y, pairs.y_duals, pairs.y_scores, pairs.x_scores)
        signs = component_signs(x_reading.correlations, y_reading.correlations)
        self.correlations_ = pairs.correlations
        self.x_scores_, self.y_scores_ = pairs.x_scores * signs, pairs.y_scores * signs
        self.x_mean_, self.x_scale_, self.x_kept_ = x.mean, x.scale, x.varies
        self.y_mean_, self.y_scale_, self.y_kept_ = y.mean, y.scale, y.varies
        self.x_weights_, self.y_weights_ = x_reading.weights * signs, y_reading.weights * signs
        self.x_correlations_ = x_reading.correlations * signs
        self.y_correlations_ = y_reading.correlations * signs
        self.x_cross_correlations_ = x_reading.cross_correlations * signs
        self.y_cross_correlations_ = y_reading.cross_correlations * signs
        self.y_loadings_ = np.zeros((signs.size, y.varies.size))
        self.y_loadings_[:, y.varies] = np.linalg.lstsq(self.y_scores_, y.values, rcond=None)[0]
        self.x_explained_, self.y_explained_ = x_reading.explained, y_reading.explained
        self.x_redundancy_, self.y_redundancy_ = x_reading.redundancy, y_reading.redundancy

    def __sklearn_tags__(self) -> Any:
        """Return the tags of scikit-learn: both sides are needed."""
        tags = super().__sklearn_tags__()
        tags.target_tags.required = True
        tags.target_tags.multi_output = True
        return tags


def _as_columns(values: FloatArray) -> FloatArray:
    return values[:, None] if values.ndim == 1 else values
