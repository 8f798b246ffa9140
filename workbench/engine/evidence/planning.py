"""Before the study: how many samples a correlation needs, or the smallest one that a design can find.

Under a false-discovery rate the bar for one pair depends on how many of all pairs are true. If a share ``s`` is,
and each is found with the chance ``power``, the threshold on p that keeps the rate ``fdr`` is

    alpha = fdr s power / ((1 - s)(1 - fdr)),

since true findings ``s power`` and false ones ``(1 - s) alpha`` then stand in the ratio ``(1 - fdr) : fdr``. The
power of one pair's test follows from Fisher's scale: ``atanh(r)`` has nearly the variance ``1 / (n - c - 2)`` (``c``
dimensions of nuisance, the intercept counted), and must exceed the critical correlation at ``alpha``.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from workbench.engine.tails import critical_r
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

#: True pairs among all, where nothing better is known: one in a thousand.
SHARE = 0.001
#: Most samples that are tried.
MOST_SAMPLES = 10_000_000
_STRENGTHS = (0.9, 0.8, 0.7, 0.6, 0.5, 0.4, 0.3)


@dataclass(frozen=True)
class PairPlan:
    """What a screen of pairs can find with a number of samples.

    Attributes
    ----------
    samples, rank : int
        Independent samples (subjects' differences count as one each), and dimensions of the nuisance with the
        intercept.
    pairs : int
        Pairs of features of different layers.
    fdr, share, power : float
        Rate, expected share of true pairs, chance to find one of the smallest size.
    alpha : float
        Threshold on p that goes with them.
    critical : float
        Correlation that just reaches the threshold.
    smallest : float
        True correlation that is found with the chance ``power``; NaN when the design cannot find any.
    needed : tuple of (float, int)
        True correlations and the samples that each needs, same nuisance.
    """

    samples: int
    rank: int
    pairs: int
    fdr: float
    share: float
    power: float
    alpha: float
    critical: float
    smallest: float
    needed: tuple[tuple[float, int], ...]


def significance_level(fdr: float, share: float, power: float) -> float:
    """Threshold on p that keeps the false-discovery rate: ``fdr s power / ((1 - s)(1 - fdr))``, at most 1.

    Examples
    --------
    >>> round(significance_level(0.05, 0.001, 0.8), 7)
    4.21e-05

    Raises
    ------
    NumericsError
        When one of them does not lie between 0 and 1.
    """
    for name, value in (("fdr", fdr), ("share", share), ("power", power)):
        if not 0.0 < value < 1.0:
            raise NumericsError(f"{name} is {value}; it must lie between 0 and 1")
    return min(fdr * share * power / ((1.0 - share) * (1.0 - fdr)), 1.0)


def power_of(r: ArrayLike, n: int, alpha: float, rank: int = 1) -> FloatArray:
    """Chance that a pair of the true correlation ``r`` has a two-sided p at or under ``alpha``.

    ``Phi((atanh|r| + |r| / (2 (n - c - 1)) - atanh r_alpha) sqrt(n - c - 2))`` with the critical correlation
    ``r_alpha`` of t and Fisher's bias; the other sign's chance is left out. Within 0.02 of simulation from 12
    samples up.

    References
    ----------
    Fisher 1921, Metron 1:3.

    Examples
    --------
    >>> round(float(power_of(0.3, 85, 0.05)), 2)
    0.8
    """
    _check_samples(n, rank)
    size = np.minimum(np.abs(np.asarray(r, dtype=np.float64)), 1.0 - 1e-15)
    moved = np.arctanh(size) + size / (2.0 * (n - rank - 1))
    bar = np.arctanh(critical_r(alpha, n - rank - 1))
    chance: FloatArray = special.ndtr((moved - bar) * np.sqrt(n - rank - 2))
    return chance


def smallest_correlation(n: int, alpha: float, power: float = 0.8, rank: int = 1) -> float:
    """Smallest true |r| that is found with the chance ``power`` at the two-sided threshold ``alpha``.

    Examples
    --------
    >>> round(smallest_correlation(85, 0.05), 2)
    0.3
    """
    _check_samples(n, rank)
    low, high = 0.0, 1.0
    for _ in range(60):
        middle = (low + high) / 2.0
        enough = float(power_of(middle, n, alpha, rank)) >= power
        low, high = (low, middle) if enough else (middle, high)
    return high


def samples_needed(r: float, alpha: float, power: float = 0.8, rank: int = 1) -> int:
    """Fewest samples with which a true correlation ``r`` is found with the chance ``power``.

    With the critical correlation of t; :func:`samples_by_fisher` is where the search begins.

    Raises
    ------
    NumericsError
        When ``r`` is 0, 1 or beyond, or needs more than ten million samples.

    Examples
    --------
    >>> [samples_needed(r, 0.05) for r in (0.1, 0.3, 0.5)]
    [782, 85, 29]
    """
    if not 0.0 < abs(r) < 1.0:
        raise NumericsError(f"the correlation is {r}; it must lie between 0 and 1 in size")
    high = max(samples_by_fisher(r, alpha, power, rank), rank + 3)
    low = rank + 2
    while high <= MOST_SAMPLES and float(power_of(r, high, alpha, rank)) < power:
        low, high = high, 2 * high
    if high > MOST_SAMPLES:
        raise NumericsError(f"a correlation of {r} needs more than {MOST_SAMPLES} samples at p = {alpha:.2g}")
    while high - low > 1:
        middle = (low + high) // 2
        enough = float(power_of(r, middle, alpha, rank)) >= power
        low, high = (low, middle) if enough else (middle, high)
    return high


def samples_by_fisher(r: float, alpha: float, power: float = 0.8, rank: int = 1) -> int:
    """Count the samples needed by the textbook's normal law: ``((z_(1 - alpha/2) + z_power) / atanh r)^2 + c + 2``.

    Right within 2 at ``alpha`` 0.05; at the thresholds of a screen of many pairs too few.

    References
    ----------
    Cohen 1988, Statistical Power Analysis for the Behavioral Sciences, 2nd ed., section 3.4.

    Examples
    --------
    >>> [samples_by_fisher(r, 0.05) for r in (0.1, 0.3, 0.5)]
    [783, 85, 30]
    """
    quantiles = float(special.ndtri(1.0 - alpha / 2.0) + special.ndtri(power))
    return int(np.ceil((quantiles / np.arctanh(abs(r))) ** 2 + rank + 2))


def independent_samples(
    subjects: int, visits: int = 1, level: Literal["visits", "subjects"] | None = None
) -> tuple[int, int]:
    """Count the independent samples of repeated measures, and the dimensions of their nuisance.

    Changes between visits: ``S (T - 1)`` contrasts of which the visits' common course takes ``T - 1``; in the
    terms of plain samples ``S (T - 1) + 1`` samples and a nuisance of ``T``. Between subjects: ``S`` and 1.

    Examples
    --------
    >>> independent_samples(12, 2, "visits"), independent_samples(12, 4, "visits")
    ((13, 2), (37, 4))
    """
    if subjects < 1 or visits < 1:
        raise NumericsError(f"{subjects} subjects with {visits} visits; give at least 1 of each")
    if level != "visits":
        return subjects, 1
    if visits < 2:
        raise NumericsError("changes between visits need two visits a subject or more")
    return subjects * (visits - 1) + 1, visits


def plan_pairs(
    samples: int,
    features: Sequence[int],
    *,
    rank: int = 1,
    fdr: float = 0.05,
    share: float = SHARE,
    power: float = 0.8,
    strengths: Sequence[float] = _STRENGTHS,
) -> PairPlan:
    """Plan a screen between layers of the given sizes: what it can find.

    Parameters
    ----------
    samples : int
        Samples that the layers share.
    features : sequence of int
        Number of features of each layer, at least two layers.
    rank : int
        Dimensions of the nuisance with the intercept: 1 without groups and batches, one more for every
        further group and batch.
    fdr, share, power : float
    strengths : sequence of float
        True correlations for which the samples needed are listed.

    Raises
    ------
    NumericsError
        When a number is out of range or fewer than two layers are given.

    Examples
    --------
    >>> plan = plan_pairs(12, [20_000, 500], rank=2)
    >>> round(plan.critical, 2), round(plan.smallest, 2), dict(plan.needed)[0.7]
    (0.93, 0.95, 38)
    """
    if len(features) < 2 or min(features) < 1:
        raise NumericsError(f"features are {list(features)}; give the number of at least two layers")
    alpha = significance_level(fdr, share, power)
    enough = samples - rank - 2 >= 1
    return PairPlan(
        samples=samples,
        rank=rank,
        pairs=sum(a * b for a, b in combinations(features, 2)),
        fdr=fdr,
        share=share,
        power=power,
        alpha=alpha,
        critical=float(critical_r(alpha, samples - rank - 1)) if enough else np.nan,
        smallest=smallest_correlation(samples, alpha, power, rank) if enough else np.nan,
        needed=tuple((float(r), samples_needed(r, alpha, power, rank)) for r in strengths),
    )


def plan_sentences(plan: PairPlan) -> tuple[str, ...]:
    """Tell a plan in words, for people.

    Examples
    --------
    >>> print(plan_sentences(plan_pairs(12, [20_000, 500], rank=2))[1])
    With 12 samples (9 degrees of freedom) a true correlation is found with a chance of 80 % from |r| = 0.95 up.
    """
    lines = [
        f"{plan.pairs:,} pairs, of which {_percent(plan.share)} are taken to be true: at a false-discovery rate "
        f"of {_percent(plan.fdr)} a pair must reach p = {plan.alpha:.1e}."
    ]
    if np.isnan(plan.smallest):
        lines.append(
            f"{plan.samples} samples leave no degree of freedom for that: no correlation can be found."
        )
    else:
        lines.append(
            f"With {plan.samples} samples ({plan.samples - plan.rank - 1} degrees of freedom) a true correlation "
            f"is found with a chance of {plan.power:.0%} from |r| = {plan.smallest:.2f} up.".replace(
                "%", " %"
            )
        )
    told = ", ".join(f"{n:,} for |r| = {r:g}" for r, n in plan.needed)
    lines.append(f"Samples needed with the same design: {told}.")
    return tuple(lines)


def _percent(share: float) -> str:
    return f"{100.0 * share:.3g} %"


def _check_samples(n: int, rank: int) -> None:
    if n - rank - 2 < 1:
        raise NumericsError(
            f"{n} samples and a nuisance of {rank} dimensions (with intercept) leave too few degrees of "
            f"freedom; at least {rank + 3} samples are needed"
        )
