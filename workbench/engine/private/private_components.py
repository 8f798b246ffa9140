"""The real components of one block, on its own: what may be private is found without a look at other blocks."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine.far_values import excess_kurtosis, withstand
from workbench.engine.linear import thin_basis
from workbench.engine.nuisance import CONSTANT_TOLERANCE, Nuisance
from workbench.engine.odd_rows import steady_rows
from workbench.engine.scree import parallel_analysis
from workbench.engine.signal_components import signal_components

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

#: Fewer dimensions left by the nuisance than this cannot tell components from noise.
FEWEST_DIMENSIONS = 20
MOST_SWEEPS = 30
SMALL_ANGLE = 1e-4
SIMPLE = 0.5


@dataclass(frozen=True, eq=False)
class BlockComponents:
    """A block at unit variance and its real components.

    Attributes
    ----------
    z : ndarray of shape (n_samples, n_kept)
        Residuals of the nuisance, odd samples and heavy tails withstood, every column of unit length.
    kept : ndarray of int, shape (n_kept,)
        Features that vary and have no gap.
    scores : ndarray of shape (n_samples, n_components)
        Orthonormal scores of the real components, turned to be simple, strongest first.
    shares : ndarray of shape (n_components,)
        Share of the block's variance, after the nuisance, of each.
    dimensions : int
        What the nuisance leaves of the samples' dimensions.
    steady : ndarray of shape (n_samples,)
        What the residuals of each sample were multiplied by; 1 for samples that are not odd, and with ranks.
    """

    z: FloatArray
    kept: IndexArray
    scores: FloatArray
    shares: FloatArray
    dimensions: int
    steady: FloatArray

    @property
    def loadings(self) -> FloatArray:
        """Correlation of every kept feature with every component, shape (n_kept, n_components)."""
        found: FloatArray = self.z.T @ self.scores
        return found


def block_components(values: FloatArray, nuisance: Nuisance, *, ranks: bool, seed: int) -> BlockComponents:
    """Real components of a block after its nuisance, by the rule of ``signal_components``, turned to be simple.

    Principal components of about equal strength are arbitrary mixtures of the factors behind them, and a
    mixture of a shared and a private one can neither be removed nor tested. Those that can be are turned to
    go with few features (:func:`simple_rotation`), which only looks at the block itself. With fewer features
    than samples the number is held to parallel analysis. No component is real where the nuisance leaves fewer
    than ``FEWEST_DIMENSIONS`` dimensions.

    Parameters
    ----------
    values : ndarray of shape (n_samples, n_features)
    nuisance : Nuisance
    ranks : bool
        Whether values are replaced by their ranks first (Spearman).
    seed : int
        For the parallel analysis of narrow blocks.
    """
    z, kept, steady = unit_residuals(values, nuisance, ranks=ranks)
    n, p = z.shape
    nothing = BlockComponents(z, kept, np.empty((n, 0)), np.empty(0), n - nuisance.rank, steady)
    if not tells_components(nuisance) or p < 2:
        return nothing
    basis = thin_basis(z)
    scores = signal_components(basis).directions
    if p < n:
        eigenvalues = basis.lengths**2 / (n - 1)
        scores = scores[:, : parallel_analysis(z, eigenvalues, random_state=seed).number]
    if not scores.shape[1]:
        return nothing
    scores = np.linalg.qr(nuisance.residuals(scores))[0]
    scores = scores @ simple_rotation(z.T @ scores)
    shares = np.sum((z.T @ scores) ** 2, axis=0) / p
    order = np.argsort(-shares, kind="stable")
    return BlockComponents(z, kept, scores[:, order], shares[order], n - nuisance.rank, steady)


def tells_components(nuisance: Nuisance) -> bool:
    """Whether the nuisance leaves dimensions enough to tell components from noise."""
    return nuisance.n_samples - nuisance.rank >= FEWEST_DIMENSIONS


def simple_rotation(loadings: FloatArray) -> FloatArray:
    """Rotation to components of few features each, as far as there are such; shape (k, k).

    Varimax, of which those components are kept whose loadings have heavier tails than normal ones: an excess
    kurtosis above ``SIMPLE`` and above three of its standard errors. Between factors that reach most
    features varimax has nothing to go by, and mixes them worse than they are; what is left of the space is
    therefore given by its principal components.

    Parameters
    ----------
    loadings : ndarray of shape (n_features, k)
    """
    rotation = varimax(loadings)
    turned = loadings @ rotation
    limit = max(SIMPLE, 3.0 * np.sqrt(24.0 / loadings.shape[0]))
    simple = excess_kurtosis(turned) > limit
    rest = turned[:, ~simple]
    principal = np.linalg.eigh(rest.T @ rest)[1][:, ::-1]
    return np.hstack([rotation[:, simple], rotation[:, ~simple] @ principal])


def varimax(loadings: FloatArray) -> FloatArray:
    """Rotation that makes the squared loadings as unequal as can be, shape (k, k).

    References
    ----------
    Kaiser 1958, Psychometrika 23:187.

    Examples
    --------
    >>> simple = np.repeat(np.eye(2), 5, axis=0)
    >>> mixed = simple @ np.array([[0.6, -0.8], [0.8, 0.6]])
    >>> turned = np.abs(mixed @ varimax(mixed))
    >>> np.allclose(np.sort(turned, axis=1), np.sort(simple, axis=1), atol=1e-3)
    True
    """
    turned, rotation = np.array(loadings.T, dtype=np.float64), np.eye(loadings.shape[1])
    planes = list(combinations(range(rotation.shape[0]), 2))
    for _ in range(MOST_SWEEPS):
        angles = [_turn_plane(turned, rotation, a, b) for a, b in planes]
        if max(angles, default=0.0) < SMALL_ANGLE:
            break
    return rotation


def _turn_plane(turned: FloatArray, rotation: FloatArray, a: int, b: int) -> float:
    """Turn two rows to the maximum in their plane, in place; returns the angle's size."""
    x, y = turned[a], turned[b]
    u, v = x * x - y * y, 2.0 * x * y
    along, across = u.sum(), v.sum()
    sine = 2.0 * (u @ v) - 2.0 * along * across / u.size
    cosine = u @ u - v @ v - (along**2 - across**2) / u.size
    angle = float(np.arctan2(sine, cosine)) / 4.0
    plane = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    turned[[a, b]] = plane @ turned[[a, b]]
    rotation[:, [a, b]] = rotation[:, [a, b]] @ plane.T
    return abs(angle)


def unit_residuals(
    values: FloatArray, nuisance: Nuisance, *, ranks: bool = False
) -> tuple[FloatArray, IndexArray, FloatArray]:
    """Residuals of the nuisance with odd samples and heavy tails withstood, columns of unit length.

    Features with a gap, and those without variance left, are left out.

    Returns
    -------
    tuple of ndarray
        The residuals, which features they are, and what each sample was multiplied by.
    """
    values = np.asarray(values, dtype=np.float64)
    finite = np.flatnonzero(np.isfinite(values).all(axis=0))
    values = values if finite.size == values.shape[1] else values[:, finite]
    if ranks:
        values = rankdata(values, axis=0).astype(np.float64)
    whole = np.linalg.norm(values, axis=0)
    rest = nuisance.residuals(values)
    varies = np.linalg.norm(rest, axis=0) > CONSTANT_TOLERANCE * whole
    if not varies.all():
        rest, finite = rest[:, varies], finite[varies]
    steady = np.ones(nuisance.n_samples)
    if not ranks and rest.size:
        found = steady_rows(rest)
        steady = found.factors
        rest = nuisance.residuals(found.values) if found.odd.size else rest
        rest = nuisance.residuals(withstand(rest, nuisance.n_samples - nuisance.rank))
    length = np.linalg.norm(rest, axis=0)
    return rest / np.where(length > 0.0, length, 1.0), finite, steady
