"""Features that pull together, against each other or independently in the plane of two components."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

MOST_NAMED = 4
GUIDE_LEVEL = 0.95


@dataclass(frozen=True)
class Pull:
    """Features at one end of one component, strongest first, and how they correlate.

    Attributes
    ----------
    component : int
        From 1.
    end : {"+", "-"}
    features : tuple of int
        Positions.
    within : tuple of three floats
        Smallest, median and largest correlation among them; NaN for one feature alone.
    """

    component: int
    end: str
    features: tuple[int, ...]
    within: tuple[float, float, float]


@dataclass(frozen=True)
class Relation:
    """Correlations between the features of two ends: their median, smallest and largest."""

    one: Pull
    other: Pull
    median: float
    low: float
    high: float


@dataclass(frozen=True)
class Relations:
    """What the correlation circle of components 1 and 2 shows, checked on the features' own correlations.

    Attributes
    ----------
    pulls : tuple of Pull
        The ends that have features beyond the guide.
    between : tuple of Relation
        Every two of them.
    guide : float
        Radius that one random direction in 20 passes at this number of samples.
    beyond : int
        Features beyond the guide.
    """

    pulls: tuple[Pull, ...]
    between: tuple[Relation, ...]
    guide: float
    beyond: int


def guide_radius(n: int, level: float = GUIDE_LEVEL) -> float:
    """Radius in the circle of two components that a random direction stays within, ``sqrt(1-(1-level)^(2/(n-3)))``.

    The squared multiple correlation of n random normal values with two given components follows a beta law
    with 1 and (n - 3) / 2. NaN with 3 samples or fewer, where every direction reaches the rim.

    Examples
    --------
    >>> round(guide_radius(12), 2), round(guide_radius(300), 2)
    (0.7, 0.14)
    """
    return float(np.sqrt(1.0 - (1.0 - level) ** (2.0 / (n - 3)))) if n > 3 else float("nan")


def feature_relations(z: FloatArray, correlations: FloatArray) -> Relations:
    """Which features pull together, against each other, or independently along components 1 and 2.

    Parameters
    ----------
    z : ndarray of shape (n_samples, n_features)
        Scaled block.
    correlations : ndarray of shape (n_features, n_components)
        Places in the circle; NaN for constant features.
    """
    places = np.nan_to_num(correlations[:, :2])
    guide = guide_radius(z.shape[0])
    radius = np.linalg.norm(places, axis=1)
    beyond = radius > guide
    pulls = [_pull(z, places, beyond, k, end) for k in range(places.shape[1]) for end in ("+", "-")]
    found = tuple(pull for pull in pulls if pull.features)
    between = tuple(_relation(z, a, b) for i, a in enumerate(found) for b in found[i + 1 :])
    return Relations(found, between, guide, int(beyond.sum()))


def _pull(z: FloatArray, places: FloatArray, beyond: NDArray[np.bool_], k: int, end: str) -> Pull:
    """Features beyond the guide that lie nearer to this end of component k than to any other end."""
    along = places[:, k] * (1.0 if end == "+" else -1.0)
    mine = np.flatnonzero(beyond & (along > 0.0) & (np.abs(places[:, k]) >= np.abs(places).max(axis=1)))
    best = mine[np.argsort(-along[mine], kind="stable")][:MOST_NAMED]
    r = _correlations(z[:, best], z[:, best])[np.triu_indices(best.size, 1)]
    within = (float(r.min()), float(np.median(r)), float(r.max())) if r.size else (float("nan"),) * 3
    return Pull(k + 1, end, tuple(best.tolist()), within)


def _relation(z: FloatArray, one: Pull, other: Pull) -> Relation:
    r = _correlations(z[:, list(one.features)], z[:, list(other.features)])
    return Relation(one, other, float(np.median(r)), float(r.min()), float(r.max()))


def _correlations(one: FloatArray, other: FloatArray) -> FloatArray:
    """Correlations of centred columns."""
    products = one.T @ other
    r: FloatArray = products / np.outer(np.linalg.norm(one, axis=0), np.linalg.norm(other, axis=0))
    return np.clip(r, -1.0, 1.0)
