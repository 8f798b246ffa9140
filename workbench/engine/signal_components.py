"""Components that carry more than noise, when noise differs from sample to sample and features go together."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.linear import RANK_TOLERANCE, ThinBasis
from workbench.engine.noise_reach import effective_features, largest_root_p, sample_noise, shrink_to_common

FloatArray = NDArray[np.float64]

SIGNAL_LEVEL = 0.01
FEWEST_FOR_NOISE = 5
ROUNDS = 10
LOWEST_NOISE = 1e-3


@dataclass(frozen=True, eq=False)
class SignalComponents:
    """Components that stand out of noise.

    Attributes
    ----------
    number : int
        How many carry signal.
    most : int
        The most that can be told: half the directions, as the other half must teach what noise is.
    level : float
        Chance, under noise, with which a component passes.
    p_values : ndarray of shape (most,)
        For component k (from 1) the chance that noise like that of the components after it reaches as far.
    sample_noise : ndarray of shape (n_samples,)
        Noise variance of each sample relative to the others (mean 1); all 1 with fewer features than samples.
    effective_features : float
        Independent features that would make noise like that of the components after the last with signal.
    directions : ndarray of shape (n_samples, number)
        Orthonormal basis of the scores' space that carries the signal, in the units of the block.
    """

    number: int
    most: int
    level: float
    p_values: FloatArray
    sample_noise: FloatArray
    effective_features: float
    directions: FloatArray


@dataclass(frozen=True, eq=False)
class _Weighted:
    """Eigenvectors of the kernel with each sample scaled by its noise, the intercept removed."""

    values: FloatArray
    vectors: FloatArray
    diagonal: FloatArray
    intercept: FloatArray


def signal_components(basis: ThinBasis, level: float = SIGNAL_LEVEL) -> SignalComponents:
    """How many components noise alone does not explain.

    Each sample is first scaled to the same noise. Then, from the back, the first component counts whose
    eigenvalue passes what the largest of noise would reach with probability ``level``, given the noise that
    the components after it show: its level and its effective number of features. With it count all before it.
    The samples' noise is estimated anew from what that leaves until the number stays.

    A sample with more noise than the others is thereby no component, and neither are small clusters of near
    copies; what is too weak to be seen at this n is not counted either. In blocks of fewer features than
    samples the noise of single samples is not told apart from signal.

    Parameters
    ----------
    basis : ThinBasis
        Of the centred and scaled block.
    level : float
        Between 0 and 1.
    """
    n, p = basis.vectors.shape[0], basis.n_features
    kernel = (basis.vectors * basis.lengths**2) @ basis.vectors.T
    noise = shrink_to_common(sample_noise(kernel), p) if p >= n else np.ones(n)
    counts: list[int] = []
    for _ in range(ROUNDS):
        used = np.maximum(noise, LOWEST_NOISE)
        weighted = _weigh(kernel, used)
        p_values = _outlying(weighted.values, n, p)
        passing = np.flatnonzero(p_values <= level)
        number = int(passing[-1]) + 1 if passing.size else 0
        features = effective_features(weighted.values[number:], max(n - 1, p) - number)
        if number in counts or p < n:
            break
        counts.append(number)
        noise = _left_over(weighted, number, used, features)
    return SignalComponents(
        number, p_values.size, level, p_values, used, features, _directions(weighted, number, used)
    )


def _weigh(kernel: FloatArray, noise: FloatArray) -> _Weighted:
    """Decompose the kernel of the block whose rows are divided by their noise."""
    weight = 1.0 / np.sqrt(noise)
    intercept = weight / np.linalg.norm(weight)
    scaled = kernel * np.outer(weight, weight)
    aside = np.outer(intercept, intercept @ scaled)
    scaled = scaled - aside - aside.T + (intercept @ scaled @ intercept) * np.outer(intercept, intercept)
    values, vectors = np.linalg.eigh(scaled)
    values, vectors = values[::-1], vectors[:, ::-1]
    kept = values > RANK_TOLERANCE * values[0]
    return _Weighted(values[kept], vectors[:, kept], np.diag(scaled), intercept)


def _outlying(values: FloatArray, n: int, p: int) -> FloatArray:
    """Return the p of each component against noise as the components after it show it."""
    most = max(0, min((n - 1) // 2, values.size - FEWEST_FOR_NOISE))
    p_values = np.empty(most)
    for k in range(most):
        rest = values[k + 1 :]
        features = effective_features(rest, max(n - 1, p) - k - 1)
        unit = rest.sum() / (rest.size * features)
        p_values[k] = largest_root_p(values[k] / unit, rest.size + 1, features)
    return p_values


def _left_over(weighted: _Weighted, number: int, noise: FloatArray, features: float) -> FloatArray:
    """Return the samples' noise as the rest shows it, allowing for the leverage of what was taken out."""
    taken = weighted.vectors[:, :number] ** 2
    residual = np.maximum(weighted.diagonal - taken @ weighted.values[:number], 0.0)
    room = np.maximum(1.0 - taken.sum(axis=1) - weighted.intercept**2, LOWEST_NOISE)
    renewed = noise * residual / room
    return shrink_to_common(renewed / renewed.mean(), features) if renewed.any() else noise


def _directions(weighted: _Weighted, number: int, noise: FloatArray) -> FloatArray:
    """Return a basis of the signal's scores with the samples' noise scaling undone, centred."""
    scores = weighted.vectors[:, :number] * np.sqrt(noise)[:, None]
    basis: FloatArray = np.linalg.qr(scores - scores.mean(axis=0))[0]
    return basis
