"""Principal components of one block, by an n x n decomposition where features outnumber samples."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray
from sklearn.base import BaseEstimator, ClassNamePrefixFeaturesOutMixin, TransformerMixin
from sklearn.utils import check_array
from sklearn.utils.validation import check_is_fitted, validate_data

from workbench.engine.linear import RANK_TOLERANCE, ThinBasis, component_signs, thin_basis
from workbench.engine.look.sample_distances import SampleDistances, sample_distances
from workbench.engine.nuisance import CONSTANT_TOLERANCE
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class ScaledBlock:
    """A block centred and, where asked, scaled to unit variance.

    Attributes
    ----------
    values : ndarray of shape (n_samples, n_features)
        Zero for features that do not vary.
    mean, scale : ndarray of shape (n_features,)
        What was subtracted and divided by (``n - 1`` degrees of freedom; 1 for a constant feature, and
        everywhere without scaling).
    spread : ndarray of shape (n_features,)
        Standard deviation of ``values``; zero for a constant feature.
    varies : ndarray of bool, shape (n_features,)
    """

    values: FloatArray
    mean: FloatArray
    scale: FloatArray
    spread: FloatArray
    varies: NDArray[np.bool_]


def scaled_block(x: FloatArray, scale: bool = True) -> ScaledBlock:
    """Centred columns of ``x``, each at unit variance when ``scale`` is set; ``x`` itself stays as it is.

    Raises
    ------
    NumericsError
        With fewer than two samples, or when no feature varies.
    """
    n, p = x.shape
    if n < 2:
        raise NumericsError(
            f"{n} sample (n_samples={n}) has no variation to decompose; principal components need at least 2"
        )
    mean = x.mean(axis=0)
    values = x - mean
    squares = np.einsum("ij,ij->j", values, values)
    # The rule of nuisance.py, with the length of x from its mean and its spread.
    varies = squares > CONSTANT_TOLERANCE**2 * (squares + n * mean**2)
    spread = np.sqrt(squares / (n - 1))
    if not varies.any():
        raise NumericsError(
            f"none of the {p} features varies over the {n} samples; principal components need at least one "
            "feature that does, so leave the block out or look at how it was prepared"
        )
    divisor = np.where(varies, spread, 1.0) if scale else np.ones(p)
    if scale:
        values /= divisor
    if not varies.all():
        values[:, ~varies] = 0.0
    return ScaledBlock(values, mean, divisor, np.where(varies, spread / divisor, 0.0), varies)


@dataclass(frozen=True, eq=False)
class Components:
    """Principal components of a scaled block.

    Attributes
    ----------
    basis : ThinBasis
        All directions of the block in sample space.
    loadings : ndarray of shape (n_components, n_features)
        Orthonormal rows ``V'``.
    scores : ndarray of shape (n_samples, n_components)
        ``U D = Z V``.
    """

    basis: ThinBasis
    loadings: FloatArray
    scores: FloatArray

    @property
    def eigenvalues(self) -> FloatArray:
        """Variance of every direction that counts, ``D^2 / (n - 1)``, largest first."""
        every: FloatArray = self.basis.lengths**2 / (self.scores.shape[0] - 1)
        return every


def decompose(
    block: ScaledBlock, n_components: int | None = None, basis: ThinBasis | None = None
) -> Components:
    """Principal components ``Z = U D V'`` of a scaled block, signed by the one rule.

    Parameters
    ----------
    block : ScaledBlock
    n_components : int or None
        As many as the block supports when left out.
    basis : ThinBasis, optional
        Of the block's values, when it is there already.

    Raises
    ------
    NumericsError
        When more components are asked for than the block supports; the message says why.
    """
    basis = thin_basis(block.values) if basis is None else basis
    k = _supported(n_components, basis, block)
    loadings = (basis.vectors[:, :k].T @ block.values) / basis.lengths[:k, None]
    signs = component_signs(loadings.T)
    loadings *= signs[:, None]
    return Components(basis, loadings, basis.vectors[:, :k] * (basis.lengths[:k] * signs))


def _supported(asked: int | None, basis: ThinBasis, block: ScaledBlock) -> int:
    """Return the number of components to keep: what was asked for, if the block has it."""
    if asked is None:
        return basis.rank
    if isinstance(asked, bool) or not isinstance(asked, int | np.integer) or asked < 1:
        raise NumericsError(
            f"n_components is {asked!r}; allowed: a whole number of at least 1, or None for all"
        )
    if asked <= basis.rank:
        return int(asked)
    n, varying = block.values.shape[0], int(block.varies.sum())
    bound = f"{n} samples give at most {n - 1} directions once centred, and {varying} features vary"
    if basis.rank < min(n - 1, varying):
        bound += f"; the others repeat these {basis.rank} (variance under {RANK_TOLERANCE:g} of the largest)"
    raise NumericsError(
        f"{asked} components were asked for and the block supports {basis.rank}: {bound}; "
        f"ask for at most {basis.rank}"
    )


class PrincipalComponents(ClassNamePrefixFeaturesOutMixin, TransformerMixin, BaseEstimator):  # type: ignore[misc]
    """Principal components of samples whose features may outnumber them by any factor.

    ``Z = U D V'`` with ``Z`` the centred (and scaled) block: from the eigenvectors of the n x n matrix
    ``ZZ'`` where features outnumber samples, so that nothing larger than the block itself is made. Missing
    values are refused. The leading components describe these samples; how many of them are more than noise
    is told by :func:`workbench.engine.look.component_number.choose_number`.

    Parameters
    ----------
    n_components : int or None, default None
        Components to keep; all that the data support when left out.
    scale : bool, default True
        Bring every feature to unit variance (``n - 1`` degrees of freedom). A constant feature takes no part.

    Attributes
    ----------
    n_components_ : int
        Components kept.
    rank_ : int
        Components that the data support.
    eigenvalues_ : ndarray of shape (rank_,)
        Variance of every component; they add up to ``total_variance_``.
    explained_variance_, explained_variance_ratio_, cumulative_ratio_ : ndarray of shape (n_components_,)
        Variance of the kept components, as such, as a share of the total, and added up.
    total_variance_ : float
        Sum of the features' variances; their number when scaled and none is constant.
    components_ : ndarray of shape (n_components_, n_features)
        Unit-length loadings; the greatest in size of each is positive. 0 for a constant feature.
    scores_ : ndarray of shape (n_samples, n_components_)
    correlations_ : ndarray of shape (n_features, n_components_)
        Correlation of each feature with each component: its place in the correlation circle. NaN for a
        constant feature.
    mean_, scale_ : ndarray of shape (n_features,)
        What centring subtracts and scaling divides by (1 for a constant feature, and without scaling).
    varies_ : ndarray of bool, shape (n_features,)
        Features that vary.
    n_features_in_ : int

    References
    ----------
    Pearson 1901, Philosophical Magazine 2:559. Hotelling 1933, Journal of Educational Psychology 24:417.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> pca = PrincipalComponents(n_components=2).fit(rng.normal(size=(10, 500)))
    >>> round(float(pca.eigenvalues_.sum()), 9), pca.rank_
    (500.0, 9)
    >>> bool(abs(np.cov(pca.scores_.T)[0, 1]) < 1e-10)
    True
    """

    def __init__(self, n_components: int | None = None, *, scale: bool = True) -> None:
        self.n_components = n_components
        self.scale = scale

    def fit(self, X: ArrayLike, y: object = None) -> Self:  # noqa: ARG002
        """Find the components of ``X``.

        Parameters
        ----------
        X : array of shape (n_samples, n_features)
        y : ignored

        Raises
        ------
        NumericsError
            With one sample, no feature that varies, or more components asked for than the data support.
        """
        block = scaled_block(validate_data(self, X, dtype=np.float64), bool(self.scale))
        self._store(block, decompose(block, self.n_components))
        return self

    def _store(self, block: ScaledBlock, found: Components) -> None:
        k = found.scores.shape[1]
        self.n_components_ = self._n_features_out = k
        self.rank_ = found.basis.rank
        self.eigenvalues_ = found.eigenvalues
        self.total_variance_ = float(np.sum(block.spread**2))
        self.explained_variance_ = self.eigenvalues_[:k]
        self.explained_variance_ratio_ = self.explained_variance_ / self.total_variance_
        self.cumulative_ratio_ = np.cumsum(self.explained_variance_ratio_)
        self.components_, self.scores_ = found.loadings, found.scores
        self.correlations_ = circle_places(block, found)
        self.mean_, self.scale_, self.varies_ = block.mean, block.scale, block.varies
        self._basis = found.basis

    def transform(self, X: ArrayLike) -> FloatArray:
        """Scores of any samples: ``((X - mean) / scale) V``.

        Parameters
        ----------
        X : array of shape (n_samples, n_features)
        """
        check_is_fitted(self)
        x = validate_data(self, X, dtype=np.float64, reset=False)
        scores: FloatArray = ((x - self.mean_) / self.scale_) @ self.components_.T
        return scores

    def inverse_transform(self, X: ArrayLike) -> FloatArray:
        """Features as far as the kept components explain them.

        Parameters
        ----------
        X : array of shape (n_samples, n_components_)
            Scores.
        """
        check_is_fitted(self)
        scores = check_array(X, dtype=np.float64)
        if scores.shape[1] != self.n_components_:
            raise NumericsError(
                f"the scores have {scores.shape[1]} columns and the fit kept {self.n_components_} components; "
                "give one column per component"
            )
        features: FloatArray = (scores @ self.components_) * self.scale_ + self.mean_
        return features

    def distances(self, n_components: int | None = None) -> SampleDistances:
        """Hotelling's T2 and the squared prediction error of every fitted sample, with their limits.

        Parameters
        ----------
        n_components : int or None
            Components taken as the model, at most ``rank_``; those kept when left out.
        """
        check_is_fitted(self)
        return sample_distances(self._basis, self.n_components_ if n_components is None else n_components)

    def __sklearn_tags__(self) -> Any:
        """Return the tags of scikit-learn: any floating type comes back as float64."""
        tags = super().__sklearn_tags__()
        tags.transformer_tags.preserves_dtype = []
        return tags


def circle_places(block: ScaledBlock, found: Components) -> FloatArray:
    """Correlation of each feature with each component, ``v_jk sqrt(eigenvalue_k) / sd_j``.

    Returns
    -------
    ndarray of shape (n_features, n_components)
        NaN for a feature that does not vary.
    """
    k = found.scores.shape[1]
    places = found.loadings.T * np.sqrt(found.eigenvalues[:k])
    with np.errstate(invalid="ignore", divide="ignore"):
        places /= block.spread[:, None]
    places[~block.varies] = np.nan
    return np.clip(places, -1.0, 1.0, out=places)
