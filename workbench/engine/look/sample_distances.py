"""How far each sample lies from the others, inside the leading components and outside them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import beta, chi2, norm

from workbench.engine.linear import ThinBasis
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

LEVELS = (0.95, 0.99)


@dataclass(frozen=True, eq=False)
class SampleDistances:
    """Distances of the samples that the components were learnt from.

    Attributes
    ----------
    n_components : int
        Components taken as the model.
    t2 : ndarray of shape (n_samples,)
        Hotelling's ``T2 = sum_k t_k^2 / eigenvalue_k``: far out within the model.
    spe : ndarray of shape (n_samples,)
        Squared prediction error: squared length of what the model leaves, far from the model.
    levels : tuple of float
        Levels of the limits.
    t2_limits, spe_limits : tuple of float
        One limit for each level; NaN where none exists.
    """

    n_components: int
    t2: FloatArray
    spe: FloatArray
    levels: tuple[float, ...]
    t2_limits: tuple[float, ...]
    spe_limits: tuple[float, ...]


def sample_distances(
    basis: ThinBasis, n_components: int, levels: tuple[float, ...] = LEVELS
) -> SampleDistances:
    """T2 and squared prediction error of every sample of a centred block.

    Both limits hold for one sample picked beforehand: of 100 good samples one passes the 99 % limit. They
    assume normal scores. Where features outnumber samples by far the limit of the prediction error is
    generous, as the few sample eigenvalues spread more than those behind them.

    Parameters
    ----------
    basis : ThinBasis
        Of the centred block, ``n`` samples.
    n_components : int
        From 1 to the rank of the block; at the rank no prediction error is left (limits NaN).

    Raises
    ------
    NumericsError
        When the block has fewer components.

    References
    ----------
    Hotelling 1947, in Techniques of Statistical Analysis. Tracy, Young & Mason 1992, Journal of Quality
    Technology 24:88 (limit of T2 for samples that are in the model). Jackson & Mudholkar 1979,
    Technometrics 21:341.

    Examples
    --------
    >>> from workbench.engine.linear import thin_basis
    >>> x = np.random.default_rng(0).normal(size=(20, 6))
    >>> found = sample_distances(thin_basis(x - x.mean(axis=0)), 2)
    >>> round(float(found.t2.sum()), 9)
    38.0
    """
    if not 1 <= n_components <= basis.rank:
        raise NumericsError(
            f"{n_components} components for the sample distances; allowed: 1 to {basis.rank}, the rank of the block"
        )
    n = basis.vectors.shape[0]
    leverage = (basis.vectors[:, :n_components] ** 2).sum(axis=1)
    spe = basis.vectors[:, n_components:] ** 2 @ basis.lengths[n_components:] ** 2
    rest = basis.lengths[n_components:] ** 2 / (n - 1)
    return SampleDistances(
        n_components,
        (n - 1) * leverage,
        spe,
        levels,
        tuple(t2_limit(n, n_components, level) for level in levels),
        tuple(prediction_error_limit(rest, level) for level in levels),
    )


def t2_limit(n: int, n_components: int, level: float) -> float:
    """Limit of T2 for a sample that helped to find the components: ``(n-1)^2/n B(k/2, (n-k-1)/2)``.

    NaN when ``n - k - 1`` is not positive: every sample then lies equally far out.

    Examples
    --------
    >>> round(t2_limit(10_000, 2, 0.95), 2)  # the chi-squared limit with 2 degrees of freedom is 5.99
    5.99
    """
    left = n - n_components - 1
    if left <= 0:
        return float("nan")
    return float((n - 1) ** 2 / n * beta.ppf(level, n_components / 2, left / 2))


def prediction_error_limit(eigenvalues: FloatArray, level: float) -> float:
    """Limit of the squared prediction error from the eigenvalues of the components left out.

    With ``theta_i = sum eigenvalue^i``, ``h = 1 - 2 theta_1 theta_3 / (3 theta_2^2)`` and ``c`` the normal
    quantile: ``theta_1 (c sqrt(2 theta_2 h^2) / theta_1 + 1 + theta_2 h (h - 1) / theta_1^2)^(1 / h)``.
    Where ``h`` is not positive the approximation does not hold, and a scaled chi-squared with the same mean
    and variance is used (Box 1954). NaN when nothing is left out.

    Examples
    --------
    >>> round(prediction_error_limit(np.ones(10), 0.95), 1)  # chi-squared, 10 degrees of freedom: 18.3
    18.3
    """
    if eigenvalues.size == 0:
        return float("nan")
    first, second, third = (float(np.sum(eigenvalues**power)) for power in (1, 2, 3))
    h = 1.0 - 2.0 * first * third / (3.0 * second**2)
    if h <= 0.0:
        return float(second / first * chi2.ppf(level, first**2 / second))
    inner = norm.ppf(level) * np.sqrt(2.0 * second * h**2) / first + 1.0
    return float(first * (inner + second * h * (h - 1.0) / first**2) ** (1.0 / h))
