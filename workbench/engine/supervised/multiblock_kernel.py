"""Partial least squares in sample space: components of ``XX'``, so that nothing of the features' size is touched.

With ``K = XX'`` the weights are ``w_a = X'u_a`` and the scores ``t_a = Xw_a = Ku_a`` (Rannar et al. 1994, J
Chemometrics 8:111). As ``u_a`` is taken from an outcome that earlier scores have been removed from, ``Ku_a``
needs only to be made orthogonal to those scores: the kernel itself is never deflated.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
Products = Callable[[FloatArray], FloatArray]

LENGTH_TOLERANCE = 1e-10
"""A score shorter than this share of the first one, or an outcome left shorter than this share, ends the fit."""


@dataclass(frozen=True, eq=False)
class KernelComponents:
    """Components of one or several outcomes in sample space.

    Attributes
    ----------
    scores : ndarray of shape (n_samples, n_components)
        Orthonormal super scores ``t_a / |t_a|``.
    lengths : ndarray of shape (n_components,)
        ``|t_a|`` for weights of length 1.
    duals : ndarray of shape (n_samples, n_components)
        ``u_a``, scaled so that the weights ``X'u_a`` have length 1.
    rotations : ndarray of shape (n_samples, n_components)
        Duals of the rotations: ``t = x X'R`` for any samples ``x``, without deflating them.
    y_weights : ndarray of shape (n_outcomes, n_components)
        Combination of the outcomes that each component follows, length 1.
    y_loadings : ndarray of shape (n_outcomes, n_components)
        ``Y't_a / |t_a|``: what a score of length 1 says about each outcome.
    """

    scores: FloatArray
    lengths: FloatArray
    duals: FloatArray
    rotations: FloatArray
    y_weights: FloatArray
    y_loadings: FloatArray

    @property
    def coefficients(self) -> FloatArray:
        """Duals ``A`` of the regression: the outcomes of centred samples ``x`` are ``x X'A``."""
        duals: FloatArray = (self.rotations / self.lengths) @ self.y_loadings.T
        return duals


def kernel_products(x: FloatArray) -> Products:
    """Return ``u -> XX'u``, by the kernel where features outnumber samples, else by ``X`` itself.

    Without forming ``XX'`` no digit is lost where the features are few and nearly collinear.
    """
    if x.shape[1] > x.shape[0]:
        kernel = x @ x.T
        return lambda u: kernel @ u
    return lambda u: x @ (x.T @ u)


def kernel_components(products: Products, y: FloatArray, n_components: int) -> KernelComponents:
    """Return the components that the outcomes draw from a kernel: at most ``n_components``, fewer once nothing is left.

    Each maximises the sum of squared covariances with what is left of the outcomes, under weights of length
    1 on what is left of the features.

    Parameters
    ----------
    products : callable
        ``u -> Ku`` for ``u`` of shape (n_samples, any).
    y : ndarray of shape (n_samples, n_outcomes)
        Centred.
    n_components : int
        At least 1.

    Raises
    ------
    NumericsError
        When not even one component is supported.

    Examples
    --------
    >>> x = np.array([[1.0, 0.0], [-1.0, 0.0], [0.0, 2.0], [0.0, -2.0]])
    >>> found = kernel_components(kernel_products(x), x[:, :1], 1)
    >>> found.scores.ravel().round(3)
    array([ 0.707, -0.707,  0.   ,  0.   ])
    """
    n, q = y.shape
    scores, duals, products_of_duals = (np.zeros((n, n_components)) for _ in range(3))
    lengths, y_weights, left = np.zeros(n_components), np.zeros((q, n_components)), y.copy()
    for a in range(n_components):
        moved = products(left)
        y_weights[:, a] = _leading(left.T @ moved)
        u, score = left @ y_weights[:, a], moved @ y_weights[:, a]
        size = np.sqrt(max(float(u @ score), 0.0))
        if size > 0.0:
            duals[:, a], products_of_duals[:, a] = u / size, score / size
        scores[:, a] = _without(products_of_duals[:, a], scores[:, :a])
        lengths[a] = np.linalg.norm(scores[:, a])
        if lengths[a] <= LENGTH_TOLERANCE * lengths[0] or _spent(left, y):
            if a == 0:
                raise NumericsError(
                    "the outcome does not vary, or no feature goes with it at all: there is no component to find"
                )
            return _finished(scores, lengths, duals, products_of_duals, y_weights, y, a)
        scores[:, a] /= lengths[a]
        left = left - np.outer(scores[:, a], scores[:, a] @ left)
    return _finished(scores, lengths, duals, products_of_duals, y_weights, y, n_components)


def centred_kernels(
    kernel: FloatArray, train: NDArray[np.intp], test: NDArray[np.intp]
) -> tuple[FloatArray, FloatArray]:
    """Kernels of training rows, and of test with training rows, of features centred at the training mean.

    Parameters
    ----------
    kernel : ndarray of shape (n_samples, n_samples)
        ``XX'``, centred anyhow.
    train, test : ndarray of int
    """
    inside, across = kernel[np.ix_(train, train)], kernel[np.ix_(test, train)]
    mean = inside.mean(axis=0)
    centre = mean.mean()
    return (
        inside - mean - mean[:, None] + centre,
        across - mean - across.mean(axis=1, keepdims=True) + centre,
    )


def batch_predictions(
    train: FloatArray, cross: FloatArray, y: FloatArray, n_components: int
) -> tuple[FloatArray, FloatArray]:
    """Predictions of new samples for many arrangements of the outcomes at once.

    Parameters
    ----------
    train : ndarray of shape (n_train, n_train)
        Kernel ``XX'`` of centred training rows.
    cross : ndarray of shape (n_new, n_train)
        ``ZX'`` of the new rows.
    y : ndarray of shape (n_train, n_outcomes, n_arrangements)
        Centred outcomes, one column set for each arrangement.
    n_components : int

    Returns
    -------
    fitted : ndarray of shape (n_components, n_train, n_outcomes, n_arrangements)
        In-sample values with 1, 2, ... components; where an arrangement supports fewer, further components
        add nothing.
    predicted : ndarray of shape (n_components, n_new, n_outcomes, n_arrangements)
    """
    n, every = len(y), np.vstack([train, cross])

    def products(u: FloatArray) -> FloatArray:
        return (every @ u.reshape(n, -1)).reshape(-1, *u.shape[1:])

    values = batch_values(products, len(every), y, n_components)
    return values[:, :n], values[:, n:]


def batch_values(products: Products, rows: int, y: FloatArray, n_components: int) -> FloatArray:
    """Values of training and further rows, for many arrangements at once, each with a kernel of its own if need be.

    Parameters
    ----------
    products : callable
        From ``u`` of shape (n_train, any, n_arrangements) to ``Ku`` of shape (rows, any, n_arrangements), training
        rows first.
    rows : int
    y : ndarray of shape (n_train, n_outcomes, n_arrangements)
        Centred outcomes.
    n_components : int

    Returns
    -------
    ndarray of shape (n_components, rows, n_outcomes, n_arrangements)
        With 1, 2, ... components.
    """
    n, q, batch = y.shape
    left = np.array(y, dtype=np.float64)
    scores = np.zeros((n_components, rows, batch))
    values = np.zeros((n_components, rows, q, batch))
    reached = np.zeros((rows, q, batch))
    first = np.zeros(batch)
    for a in range(n_components):
        u = left[:, 0] if q == 1 else _batch_directions(products(left)[:n], left)
        size = np.sqrt(np.einsum("np,np->p", u, u))
        score = products(np.divide(u, size, out=np.zeros_like(u), where=size > 0.0)[:, None])[:, 0]
        for _ in range(2 if a else 0):
            along = np.einsum("anp,np->ap", scores[:a, :n], score[:n])
            score -= np.einsum("anp,ap->np", scores[:a], along)
        length = np.sqrt(np.einsum("np,np->p", score[:n], score[:n]))
        first = length if a == 0 else first
        score = np.divide(score, length, out=np.zeros_like(score), where=length > LENGTH_TOLERANCE * first)
        loading = np.einsum("np,nqp->qp", score[:n], left)
        left -= score[:n, None] * loading
        reached += score[:, None] * loading
        scores[a], values[a] = score, reached
    return values


def _batch_directions(moved: FloatArray, left: FloatArray) -> FloatArray:
    """Leading combination of the outcomes that are left, for each arrangement; ``moved`` is ``K left``."""
    inner = np.einsum("nip,njp->pij", left, moved)
    weights = np.linalg.eigh(0.5 * (inner + inner.transpose(0, 2, 1)))[1][:, :, -1]
    directions: FloatArray = np.einsum("nip,pi->np", left, weights)
    return directions


def _leading(inner: FloatArray) -> FloatArray:
    if inner.shape[0] == 1:
        return np.ones(1)
    last = inner.shape[0] - 1
    vector: FloatArray = scipy.linalg.eigh(0.5 * (inner + inner.T), subset_by_index=[last, last])[1][:, 0]
    return vector


def _without(vector: FloatArray, scores: FloatArray) -> FloatArray:
    for _ in range(2):
        vector = vector - scores @ (scores.T @ vector)
    return vector


def _spent(left: FloatArray, y: FloatArray) -> bool:
    return bool(np.linalg.norm(left) <= LENGTH_TOLERANCE * np.linalg.norm(y))


def _finished(
    scores: FloatArray,
    lengths: FloatArray,
    duals: FloatArray,
    products_of_duals: FloatArray,
    y_weights: FloatArray,
    y: FloatArray,
    count: int,
) -> KernelComponents:
    """Rotations from ``P'W``, which is upper triangular in sample space, and the loadings of the outcomes."""
    scores, lengths, duals = scores[:, :count], lengths[:count], duals[:, :count]
    triangle = (scores.T @ products_of_duals[:, :count]) / lengths[:, None]
    rotations = scipy.linalg.solve_triangular(triangle, duals.T, trans="T").T
    return KernelComponents(scores, lengths, duals, rotations, y_weights[:, :count], y.T @ scores)
