"""Tail probabilities of correlations: p without underflow, and the correlation that a p belongs to.

With normal residuals and ``df = n - c - 1`` degrees of freedom (``c`` dimensions of nuisance, the intercept
counted), ``t = r sqrt(df / (1 - r^2))`` follows Student's t under no association, so that the two-sided p is
the regularised incomplete beta function

    p = I_x(df / 2, 1 / 2),   x = 1 - r^2.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

FloatArray = NDArray[np.float64]

#: Smallest p that is written out; anything smaller is given as this, and ``log_p`` keeps the exact size.
SMALLEST_P = float(np.finfo(np.float64).tiny)
_FRACTION_TOLERANCE = 1e-15
# Values of r^2 (df + 5) from which on the continued fraction is used, and from which on with fewer terms.
_REACHES = (3.0, 12.0, 36.0)
_CHUNK = 16_384


#: Correlations so small that 1 - r^2 is no number to go by.
TINY = 1e-4


def log_p_value(r: ArrayLike, df: int) -> FloatArray:
    """Natural logarithm of the two-sided p of correlations, exact where p itself underflows.

    Far in the tail the continued fraction of the incomplete beta function is used (DLMF 8.17.22, with as
    many terms as reach 1e-15), elsewhere the function itself. The value depends on ``r`` and ``df`` alone,
    not on what else is in the array.

    Parameters
    ----------
    r : array_like
        Correlations; beyond 1 in size they are taken as 1 (log p is then minus infinity), NaN stays NaN.
    df : int
        Degrees of freedom ``n - c - 1``, at least 1.

    References
    ----------
    NIST Digital Library of Mathematical Functions, section 8.17(v), https://dlmf.nist.gov/8.17

    Examples
    --------
    >>> round(float(np.exp(log_p_value(0.5, 18))), 6)
    0.02477
    >>> round(float(log_p_value(0.9999, 1000)), 3)
    -4262.301
    """
    size = np.minimum(np.abs(np.asarray(r, dtype=np.float64)), 1.0)
    flat = size.ravel()
    log_p = np.full(flat.shape, np.nan)
    # The fraction converges fast for x < (a + 1) / (a + b + 2), that is r^2 > 3 / (df + 5).
    scaled = flat**2 * (df + 5.0)
    near = scaled <= _REACHES[0]
    # 1 - r^2 has lost the digits of a tiny r; the complement keeps them, at twelve times the cost.
    tiny = flat < TINY
    log_p[near] = np.log(special.betainc(df / 2.0, 0.5, 1.0 - flat[near] ** 2))
    log_p[tiny] = np.log(special.betaincc(0.5, df / 2.0, flat[tiny] ** 2))
    for low, high in pairwise((*_REACHES, np.inf)):
        far = (scaled > low) & (scaled <= high)
        if far.any():
            log_p[far] = _log_far_tail(flat[far], df, _terms_needed(low, df))
    return log_p.reshape(size.shape)


def p_from_log(log_p: ArrayLike) -> FloatArray:
    """P value of its logarithm, never below ``SMALLEST_P`` (2.2e-308) and never above 1; NaN stays NaN.

    Examples
    --------
    >>> p_from_log([0.0, -5000.0])
    array([1.00000000e+000, 2.22507386e-308])
    """
    p: FloatArray = np.clip(np.exp(np.asarray(log_p, dtype=np.float64)), SMALLEST_P, 1.0)
    return p


def critical_r(p: ArrayLike, df: int) -> FloatArray:
    """Size of the correlation whose two-sided p is ``p``.

    Parameters
    ----------
    p : array_like
        Between 1e-300 and 1.
    df : int
        Degrees of freedom ``n - c - 1``, at least 1.

    Examples
    --------
    >>> round(float(critical_r(0.05, 18)), 4)
    0.4438
    """
    t = -special.stdtrit(df, np.asarray(p, dtype=np.float64) / 2.0)
    with np.errstate(divide="ignore"):
        size: FloatArray = 1.0 / np.hypot(1.0, np.sqrt(df) / t)
    return size


def _log_far_tail(size: FloatArray, df: int, terms: int) -> FloatArray:
    a = df / 2.0
    out = np.empty_like(size)
    for start in range(0, size.size, _CHUNK):
        part = size[start : start + _CHUNK]
        # (1 - r)(1 + r) keeps digits near r = 1, log1p(-r^2) near r = 0.
        x = (1.0 - part) * (1.0 + part)
        with np.errstate(divide="ignore"):
            log_x = np.where(x > 0.5, np.log1p(-(part**2)), np.log(x))
        fraction = _beta_fraction(x, a, terms)
        out[start : start + _CHUNK] = a * log_x + np.log(part) - np.log(fraction)
    result: FloatArray = out - np.log(a) - special.betaln(a, 0.5)
    return result


@lru_cache(maxsize=1024)
def _terms_needed(scaled: float, df: int) -> int:
    """Levels of the fraction after which correlations with ``r^2 (df + 5) = scaled`` change no more."""
    x = 1.0 - scaled / (df + 5.0)
    terms = 8
    while x > 0.0 and terms < 4096:
        fewer, more = _beta_fraction(x, df / 2.0, terms), _beta_fraction(x, df / 2.0, 2 * terms)
        if abs(fewer / more - 1.0) <= _FRACTION_TOLERANCE:
            break
        terms += terms // 2
    return terms


def _beta_fraction(x: Any, a: float, terms: int) -> Any:
    """``1 + d_1 / (1 + d_2 / (1 + ...))`` of I_x(a, 1/2), from the innermost of ``terms`` levels outwards."""
    b = 0.5
    fraction = x * 0.0 + 1.0
    for level in range(terms, 0, -1):
        m = level // 2
        if level % 2:
            d = -(a + m) * (a + b + m) / ((a + 2 * m) * (a + 2 * m + 1))
        else:
            d = m * (b - m) / ((a + 2 * m - 1) * (a + 2 * m))
        fraction = 1.0 + d * x / fraction
    return fraction
