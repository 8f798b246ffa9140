"""Two networks pair by pair: kept, gained, lost, reversed, and whether the correlation itself changed."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.stats import norm

FloatArray = NDArray[np.float64]

STATUSES = ("kept", "reversed", "gained", "lost")
LARGEST = 1.0 - 1e-12


@dataclass(frozen=True, eq=False)
class PairSide:
    """Pairs of features as one analysis has them, one entry for each pair that is an edge in either analysis.

    Attributes
    ----------
    edge : ndarray of bool
        Whether the pair is an edge here.
    r : ndarray
        Its correlation here, edge or not; NaN where a feature was not measured here.
    rows : ndarray
        Independent rows that the correlation rests on: samples less the columns of the design, ``n - c``.
    """

    edge: NDArray[np.bool_]
    r: FloatArray
    rows: FloatArray


def difference_p(first: PairSide, second: PairSide, *, ranks: bool = False) -> FloatArray:
    r"""Return the two-sided p of equal correlations in two independent sets of samples, NaN where there is none.

    .. math:: z = \frac{\operatorname{artanh} r_1 - \operatorname{artanh} r_2}{\sqrt{1/(m_1 - 2) + 1/(m_2 - 2)}}

    with ``m = n - c`` rows; with no column of the design but the intercept that is the usual ``n - 3``. For rank
    correlations each variance is ``(1 + r^2/2) / (m - 2)`` (Bonett & Wright 2000).

    References
    ----------
    Fisher RA (1921). On the probable error of a coefficient of correlation deduced from a small sample. Metron 1:3.

    Bonett DG, Wright TA (2000). Sample size requirements for estimating Pearson, Kendall and Spearman correlations.
    Psychometrika 65:23.

    Examples
    --------
    Two correlations of 0.5 and 0.1 on 53 samples each: z = (0.549 - 0.100) / sqrt(2 / 50) = 2.245.

    >>> sides = [PairSide(np.array([True]), np.array([r]), np.array([52.0])) for r in (0.5, 0.1)]
    >>> difference_p(*sides).round(4)
    array([0.0248])
    """
    variance = np.zeros(first.r.size)
    for side in (first, second):
        spread = 1.0 + side.r**2 / 2.0 if ranks else np.ones(side.r.size)
        variance += np.where(side.rows > 2, spread / np.maximum(side.rows - 2.0, 1.0), np.nan)
    z1, z2 = (np.arctanh(np.clip(side.r, -LARGEST, LARGEST)) for side in (first, second))
    return np.asarray(2.0 * norm.sf(np.abs(z1 - z2) / np.sqrt(variance)), dtype=np.float64)


def adjusted_over(p: FloatArray, tests: int) -> FloatArray:
    """Return the false-discovery rates of some p's of a family of ``tests``, the others taken as 1; NaN stays.

    Pairs that were picked for being strong differ from their other study more than pairs do on the whole. Counted
    among all pairs, picked or not, they are held to the rate for whatever reason they were picked.

    Examples
    --------
    >>> adjusted_over(np.array([0.001, 0.2, np.nan]), 10).round(3)
    array([0.01, 1.  ,  nan])
    """
    q = np.full(p.shape, np.nan)
    held = np.flatnonzero(~np.isnan(p))
    order = held[np.argsort(p[held], kind="stable")]
    scaled = p[order] * (max(tests, order.size) / np.arange(1, order.size + 1))
    q[order] = np.minimum(np.minimum.accumulate(scaled[::-1])[::-1], 1.0)
    return q


def statuses(first: PairSide, second: PairSide) -> NDArray[np.str_]:
    """Return what became of each pair from the first analysis to the second.

    ``kept``: an edge in both, of one sign; ``reversed``: an edge in both, of opposite signs; ``gained``: an edge in the
    second alone; ``lost``: in the first alone.
    """
    both = first.edge & second.edge
    opposite = np.sign(first.r) * np.sign(second.r) < 0
    return np.where(
        both & opposite, "reversed", np.where(both, "kept", np.where(second.edge, "gained", "lost"))
    )


def adjusted_rand(first: Sequence[int], second: Sequence[int]) -> float:
    """Return the adjusted Rand index of two partitions of the same things: 1 equal, about 0 as by chance.

    References
    ----------
    Hubert L, Arabie P (1985). Comparing partitions. J Classif 2:193.

    Examples
    --------
    >>> adjusted_rand([1, 1, 2, 2], [7, 7, 3, 3]), round(adjusted_rand([1, 1, 2, 2], [1, 2, 1, 2]), 9)
    (1.0, -0.5)
    """

    def pairs(counts: Mapping[Any, int]) -> float:
        return sum(count * (count - 1) / 2.0 for count in counts.values())

    together = pairs(Counter(zip(first, second, strict=True)))
    own = [pairs(Counter(labels)) for labels in (first, second)]
    every = len(first) * (len(first) - 1) / 2.0
    if every == 0.0:
        return float("nan")
    expected, largest = own[0] * own[1] / every, (own[0] + own[1]) / 2.0
    return 1.0 if largest == expected else float((together - expected) / (largest - expected))


def community_table(
    first: Mapping[tuple[str, str], int], second: Mapping[tuple[str, str], int]
) -> pd.DataFrame:
    """Return for each community of the first network the one of the second that is most like it.

    ``shared`` counts the features in both, ``jaccard`` is their share of the features of the two; 0 where no feature of
    the community has an edge in the second network.

    Parameters
    ----------
    first, second : mapping
        Community of each feature that has an edge, features named alike in both.
    """
    members = [_members(one) for one in (first, second)]
    rows = []
    for number in sorted(members[0]):
        own = members[0][number]
        found = [
            (len(own & other) / len(own | other), -which, len(own & other))
            for which, other in members[1].items()
        ]
        jaccard, which, shared = max(found, default=(0.0, 0, 0))
        rows.append((number, len(own), -which if shared else None, len(members[1].get(-which, ())) if shared else 0,
                     shared, jaccard if shared else 0.0))  # fmt: skip
    columns = ["community", "features", "most_like", "features_there", "shared", "jaccard"]
    table = pd.DataFrame(rows, columns=columns)
    return table.astype({"most_like": "Int64"})


def _members(found: Mapping[tuple[str, str], int]) -> dict[int, set[tuple[str, str]]]:
    members: dict[int, set[tuple[str, str]]] = {}
    for feature, number in found.items():
        members.setdefault(number, set()).add(feature)
    return members
