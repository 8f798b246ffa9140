"""How large an eigenvalue pure noise reaches: the law of the largest one, and the noise level of each sample."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.stats import gamma

FloatArray = NDArray[np.float64]

# Shifted gamma law with mean, variance and skewness of the Tracy-Widom law of order 1 (Chiani 2014, table 1).
_TW_SHAPE, _TW_SCALE, _TW_SHIFT = 46.446, 0.186054, 9.84801


def largest_root_p(root: float, n: float, p: float) -> float:
    """Probability that the largest eigenvalue of ``GG'``, ``G`` of n x p standard normals, passes ``root``.

    By the Tracy-Widom law after Johnstone's centring and scaling; good to about 0.01 from ``n`` = 5 on.
    ``n`` and ``p`` may be exchanged, and need not be whole.

    References
    ----------
    Johnstone 2001, Annals of Statistics 29:295. Chiani 2014, Journal of Multivariate Analysis 129:69.

    Examples
    --------
    >>> round(largest_root_p((19.5**0.5 + 499.5**0.5) ** 2, 20, 500), 2)  # at the centre, 1 - F(0)
    0.17
    """
    side, other = np.sqrt(n - 0.5), np.sqrt(p - 0.5)
    centre = (side + other) ** 2
    width = (side + other) * (1.0 / side + 1.0 / other) ** (1.0 / 3.0)
    return float(gamma.sf(((root - centre) / width + _TW_SHIFT) / _TW_SCALE, _TW_SHAPE))


def effective_features(eigenvalues: FloatArray, most: float) -> float:
    """How many independent features would spread the eigenvalues of noise as these are spread.

    ``N = (q + 2) a^2 / (q b - a^2)`` with ``q`` eigenvalues of sum ``a`` and sum of squares ``b``, at most
    ``most``: correlated features (near copies, say) count less than one each, and unequal noise does too.

    References
    ----------
    Patterson, Price & Reich 2006, PLoS Genetics 2:e190 (``q`` eigenvalues for their m - 1).

    Examples
    --------
    >>> g = np.random.default_rng(1).normal(size=(50, 400))
    >>> copies = np.repeat(g, 5, axis=1)
    >>> bool(300 < effective_features(np.linalg.eigvalsh(copies @ copies.T), 2000) < 500)
    True
    """
    q, total = eigenvalues.size, float(eigenvalues.sum())
    excess = q * float(np.sum(eigenvalues**2)) - total**2
    if excess <= 0.0:
        return float(most)
    return min(max((q + 2) * total**2 / excess, 1.0), float(most))


def sample_noise(kernel: FloatArray) -> FloatArray:
    """Relative noise variance of each sample, by the Dyson equaliser; mean 1.

    From the diagonal ``g`` of the resolvent ``eta (K + eta^2 I)^-1`` at ``eta`` = the median singular value,
    ``1 / g - eta`` is proportional to a sample's noise; a few strong components hardly move it.

    Parameters
    ----------
    kernel : ndarray of shape (n_samples, n_samples)
        ``ZZ'`` of a centred block.

    References
    ----------
    Landa & Kluger 2023, The Dyson equalizer, arXiv:2306.11263.
    """
    n = kernel.shape[0]
    values, vectors = np.linalg.eigh(kernel)
    values, vectors = np.maximum(values[1:], 0.0), vectors[:, 1:]
    eta = float(np.sqrt(np.median(values)))
    if eta == 0.0:
        return np.ones(n)
    # The direction of the mean is empty in a centred block: its part is 1 / eta like that of no variance.
    resolvent = 1.0 / eta + vectors**2 @ (eta / (values + eta**2) - 1.0 / eta)
    noise: FloatArray = np.maximum(1.0 / resolvent - eta, 0.0)
    return noise / noise.mean() if noise.any() else np.ones(n)


def shrink_to_common(noise: FloatArray, features: float) -> FloatArray:
    """Noise levels drawn towards their common value 1, by as much as chance explains of their spread.

    A sample's level over ``features`` independent features has the sampling variance ``2 / features``; what
    the levels vary beyond that is kept.
    """
    spread = float(noise.var())
    kept = max(0.0, 1.0 - 2.0 / features / spread) if spread > 0.0 else 0.0
    drawn: FloatArray = 1.0 + kept * (noise - 1.0)
    return drawn
