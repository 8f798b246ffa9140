"""Heavy tails withstood: features with far values are replaced by their normal scores."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri
from scipy.stats import rankdata

FloatArray = NDArray[np.float64]

#: Excess kurtosis above which a feature is replaced: that of a normal one is 0, of Student's t with 10 degrees 1.
HEAVY = 1.0
#: With fewer degrees of freedom residuals are too much alike in shape to tell.
FEWEST = 15


def withstand(residuals: FloatArray, freedom: int) -> FloatArray:
    """Residuals, features of heavy tails replaced by normal scores of their ranks, with the same variance.

    The t law of a correlation needs that one of the two features is normal, or both nearly; two features with
    a far value in the same sample by chance reach any correlation. The normal score of rank k of n is
    ``ndtri((k - 3/8) / (n + 1/4))`` (Blom 1958); ties share the mean of their ranks. Looks at one block alone,
    and hence keeps what is independent of another block independent. With fewer than ``FEWEST`` degrees of
    freedom nothing is changed.

    Parameters
    ----------
    residuals : ndarray of shape (n_samples, n_features)
        Centred columns.
    freedom : int
        Degrees of freedom of their variance.

    Examples
    --------
    >>> x = np.append(np.linspace(-1.0, 1.0, 40), 40.0)[:, None]
    >>> bool(withstand(x - x.mean(), 40)[-1, 0] < 20.0)
    True
    """
    result = np.array(residuals, dtype=np.float64)
    if freedom < FEWEST:
        return result
    heavy = np.flatnonzero(excess_kurtosis(result) > HEAVY)
    if heavy.size:
        part = result[:, heavy]
        scores = ndtri((rankdata(part, axis=0) - 0.375) / (part.shape[0] + 0.25))
        scores -= scores.mean(axis=0)
        length = np.linalg.norm(scores, axis=0)
        result[:, heavy] = scores * (np.linalg.norm(part, axis=0) / np.where(length > 0.0, length, 1.0))
    return result


def excess_kurtosis(centred: FloatArray) -> FloatArray:
    """Fourth moment over the square of the second, less 3; 0 for a column of zeros."""
    square = centred**2
    second = square.mean(axis=0)
    fourth = np.einsum("ij,ij->j", square, square) / centred.shape[0]
    excess: FloatArray = np.where(second > 0.0, fourth / np.where(second > 0.0, second, 1.0) ** 2 - 3.0, 0.0)
    return excess
