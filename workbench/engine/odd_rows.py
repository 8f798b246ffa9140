"""Odd samples withstood: a row whose values are large throughout is brought back to the size of the others.

A tube that went wrong in both assays has large values, of random sign, in thousands of features of both blocks,
and every pair of them gets a product that outweighs all other samples: in simulated studies with one such
sample and nothing shared Pearson's correlation drew false edges in 100 of 100. Leaving out each pair's most
influential sample costs a tenth of the true edges and does not help; the sample, not the pair, is what is odd, and
all features of a block together show which it is.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import CONSTANT_TOLERANCE
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

#: Mean square of a sample's standardised residuals, in medians over the samples, from which on it is odd.
ODD = 2.0
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
    """Residuals with odd samples shrunk to the median size of a sample.

    Features are scaled to unit variance for the judgement; a sample is odd when its mean square over them
    exceeds ``ODD`` medians, and is then multiplied by the root of the median over its mean square; until none
    is odd. Looks at one block alone, and hence keeps what is independent of another block independent. The
    nuisance has to be removed again afterwards.

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
    factors = np.ones(values.shape[0])
    one = np.arange(values.shape[0]) if together is None else np.unique(together, return_inverse=True)[1]
    for _ in range(_ROUNDS):
        size = (np.bincount(one, _row_sizes(values * factors[:, None])) / np.bincount(one))[one]
        usual = float(np.median(size))
        odd = size > ODD * usual
        if usual <= 0.0 or not odd.any():
            break
        factors[odd] *= np.sqrt(usual / size[odd])
    return SteadyRows(values * factors[:, None], factors)


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
