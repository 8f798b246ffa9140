"""Odd samples withstood: a row whose values are large throughout is brought back to the size of the others.

A tube that went wrong in both assays has large values, of random sign, in thousands of features of both blocks,
and every pair of them gets a product that outweighs all other samples: in simulated studies with one such
sample and nothing shared Pearson's correlation drew false edges in 100 of 100. Leaving out each pair's most
influential sample costs a tenth of the true edges and does not help; the sample, not the pair, is what is odd, and
all features of a block together show which it is.

Large throughout is not enough: a factor that reaches most features makes the samples large in which it is strong,
and they carry what is to be found. A sample is odd by what the block's real components, found without it, leave of it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import chi2

from workbench.engine.linear import thin_basis
from workbench.engine.nuisance import CONSTANT_TOLERANCE
from workbench.engine.signal_components import signal_components
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

#: Mean square of a sample's standardised residuals, in medians over the samples, from which on it is odd.
ODD = 2.0
#: In blocks of few features the largest of all samples may be above that with this chance, and no more.
LEVEL = 0.01
_LEAST_ROOM = 1e-3
_ROUNDS = 8


@dataclass(frozen=True, eq=False)
class SteadyRows:
    """A block whose odd samples have been shrunk.

    Attributes
    ----------
    values : ndarray of shape (n_samples, n_features)
    factors : ndarray of shape (n_samples,)
        What each sample's residuals were multiplied by; 1 for samples that are not odd.
    """

    values: FloatArray
    factors: FloatArray

    @property
    def odd(self) -> NDArray[np.intp]:
        """Samples that were shrunk."""
        return np.flatnonzero(self.factors < 1.0)


def steady_rows(residuals: FloatArray, together: NDArray[np.intp] | None = None) -> SteadyRows:
    """Residuals with odd samples shrunk, so that what is their own is of the median size of a sample.

    Features are scaled to unit variance for the judgement. A sample is suspected when its mean square over them
    exceeds ``ODD`` medians, and what the largest of as many samples of independent normal features exceeds with a
    chance of ``LEVEL``, which is more than that with fewer than about 40 features. With the suspects shrunk to the
    median the others are judged again, until none is left. A suspect is odd when the same holds for what the real
    components of the samples that are not suspected leave of it (:func:`own_sizes`), and is then multiplied by
    one over the root of that size. Looks at one block alone, and hence keeps what is independent of another block
    independent. The nuisance has to be removed again afterwards.

    Parameters
    ----------
    residuals : ndarray of shape (n_samples, n_features)
        The nuisance removed. A feature with a gap, or without variance, has no part in the judgement.
    together : ndarray of int, shape (n_samples,), optional
        Rows with the same number are judged as one (changes of one subject).

    Raises
    ------
    NumericsError
        When ``residuals`` are not samples x features.

    Examples
    --------
    >>> x = np.random.default_rng(0).normal(size=(20, 500))
    >>> x[3] *= 4.0
    >>> steady_rows(x - x.mean(axis=0)).odd
    array([3])
    """
    values = np.array(residuals, dtype=np.float64)
    if values.ndim != 2 or 0 in values.shape:
        raise NumericsError(
            f"residuals have shape {values.shape}; give samples x features, at least one of each"
        )
    one = np.arange(values.shape[0]) if together is None else np.unique(together, return_inverse=True)[1]
    suspects = _suspects(values, one)
    factors = np.ones(values.shape[0])
    if suspects.any() and not suspects.all():
        sizes, features = own_sizes(values, suspects)
        size = _joined(sizes, one)
        odd = suspects & (size > _limit(features, one))
        factors[odd] = 1.0 / np.sqrt(size[odd])
    return SteadyRows(values * factors[:, None], factors)


def own_sizes(values: FloatArray, suspects: NDArray[np.bool_]) -> tuple[FloatArray, float]:
    """Size of what components of the other samples leave of each suspect, in medians of the others.

    The size is the mean square over the features, or their median square where that is the smaller multiple of the
    others': a few far values do not make a sample odd.

    Features are scaled by the others, whose real components are told by ``signal_components``. What is left of a
    suspect after its least-squares fit on their loadings holds the error of these as well, and is larger by
    ``1 + u'u`` with ``u`` its scores in units of the others' scores; what is left of one of the others is smaller by
    ``1 - u'u``. Both are allowed for.

    Parameters
    ----------
    values : ndarray of shape (n_samples, n_features)
        Residuals of the nuisance.
    suspects : ndarray of bool, shape (n_samples,)
        Some, but not all.

    Returns
    -------
    sizes : ndarray of shape (n_samples,)
        1 for samples that are not suspected.
    features : float
        Independent features that would make noise like that of the others.
    """
    others = values[~suspects]
    length = np.sqrt(np.mean(others**2, axis=0))
    peak = np.abs(values).max(axis=0)
    able = np.isfinite(peak) & (length > CONSTANT_TOLERANCE * peak)
    scaled = values[:, able] / length[able]
    others = scaled[~suspects] - scaled[~suspects].mean(axis=0)
    found = signal_components(thin_basis(others))
    scores = found.directions
    loadings = others.T @ scores
    fit = np.linalg.lstsq(loadings, scaled[suspects].T, rcond=None)[0]
    room = np.maximum(1.0 - np.sum(scores**2, axis=1), _LEAST_ROOM)
    usual = (others - scores @ loadings.T) ** 2 / room[:, None]
    left = (scaled[suspects] - fit.T @ loadings.T) ** 2 / (1.0 + np.sum(fit**2, axis=0))[:, None]
    sizes = np.ones(values.shape[0])
    whole, middle = (
        over(left, axis=1) / max(float(np.median(over(usual, axis=1))), 1e-300)
        for over in (np.mean, np.median)
    )
    sizes[suspects] = np.minimum(whole, middle)
    return sizes, found.effective_features


def _suspects(values: FloatArray, one: NDArray[np.intp]) -> NDArray[np.bool_]:
    """Return which samples are large throughout, all rows of one together."""
    factors = np.ones(values.shape[0])
    limit = _limit(values.shape[1], one)
    for _ in range(_ROUNDS):
        size = _joined(_row_sizes(values * factors[:, None]), one)
        usual = float(np.median(size))
        large = size > limit * usual
        if usual <= 0.0 or not large.any():
            break
        factors[large] *= np.sqrt(usual / size[large])
    suspects: NDArray[np.bool_] = factors < 1.0
    return suspects


def _limit(features: float, one: NDArray[np.intp]) -> FloatArray:
    """Return the size, in medians, above which a row is odd; of more rows judged together a lower one."""
    rows = np.bincount(one)
    law = chi2(np.maximum(features, 1.0) * rows)
    limit: FloatArray = np.maximum(ODD, law.isf(LEVEL / rows.size) / law.median())[one]
    return limit


def _joined(sizes: FloatArray, one: NDArray[np.intp]) -> FloatArray:
    """Return for each row the mean over the rows that are judged with it."""
    joined: FloatArray = (np.bincount(one, sizes) / np.bincount(one))[one]
    return joined


def _row_sizes(values: FloatArray) -> FloatArray:
    """Mean square of each sample over the features, these at unit mean square."""
    square = values**2
    mean = square.mean(axis=0)
    peak = np.abs(values).max(axis=0)
    able = np.isfinite(mean) & (mean > (CONSTANT_TOLERANCE * np.where(np.isfinite(peak), peak, 0.0)) ** 2)
    if not able.any():
        return np.zeros(values.shape[0])
    sizes: FloatArray = (square[:, able] / mean[able]).mean(axis=1)
    return sizes
