"""Small pieces of text and robust figures that the checks share."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from workbench.intake.faults import counted, listed

FloatArray = NDArray[np.float64]

MOST_NAMED = 6
NORMAL_SPREAD = 1.4826


def percent(share: float) -> str:
    """Return a share in percent, one digit after the point under 10 %.

    >>> percent(0.1234), percent(0.0123)
    ('12 %', '1.2 %')
    """
    return f"{100 * share:.0f} %" if share == 0.0 or share >= 0.0995 else f"{100 * share:.1f} %"


def small(p: float) -> str:
    """Return a p readably.

    >>> small(0.0312), small(3.2e-9)
    ('0.031', '3e-09')
    """
    return f"{p:.0e}" if p < 0.001 else f"{p:.2g}"


def some(names: Sequence[str]) -> str:
    """Return the first six names in quotes and how many more there are."""
    return listed(list(names), MOST_NAMED)


def number_of(names: Sequence[str], noun: str) -> str:
    """Return a number with its noun and the first names.

    >>> number_of(["S1", "S2"], "sample")
    "2 samples: 'S1', 'S2'"
    """
    return f"{counted(len(names), noun)}: {some(names)}"


def robust_spread(values: FloatArray) -> float:
    """Return ``1.4826`` times the median distance from the median: the standard deviation of normal values."""
    return float(NORMAL_SPREAD * np.median(np.abs(values - np.median(values))))


def robust_z(values: FloatArray, least_spread: float = 0.0) -> FloatArray:
    """Return distances from the median in robust spreads, ``least_spread`` where that is smaller.

    Zero throughout when there is no spread at all.

    >>> robust_z(np.array([1.0, 2.0, 3.0, 4.0, 50.0])).round(1)
    array([-1.3, -0.7,  0. ,  0.7, 31.7])
    """
    spread = max(robust_spread(values), least_spread)
    away: FloatArray = values - np.median(values)
    return away / spread if spread > 0.0 else np.zeros_like(away)
