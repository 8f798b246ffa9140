"""What speaks against an edge, in plain sentences: what a sceptic would ask, with the figure that makes him ask."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import pandas as pd

HALF = 0.5
MUCH_FILLED_IN = 0.2
UNSTABLE = 0.5


def doubts_of(edge: Mapping[str, Any], fdr: float) -> list[str]:
    """Return what would weaken an edge, a sentence each; an empty list when nothing does.

    Parameters
    ----------
    edge : mapping
        A row of edges.tsv; columns that it lacks, and cells that are empty, raise no doubt.
    fdr : float
        The level at which edges were selected.

    Examples
    --------
    >>> doubts_of({"r": 0.8, "r_without_one": 0.3, "r_spearman": 0.75, "q": 0.001}, 0.05)
    ['one sample carries half of it or more: without it r falls to 0.30 (r_without_one)']
    """
    r = float(edge["r"])
    found = []
    if edge.get("support") == "module":
        found.append(
            "its module carries it, its own test does not: p and q are of how its ends go with the other layer's "
            "component (support)"
        )
    alone = _number(edge, "r_without_one")
    if alone is not None and _lost(r, alone):
        found.append(
            f"one sample carries half of it or more: without it r falls to {alone:.2f} (r_without_one)"
        )
    ranks = _number(edge, "r_spearman")
    if ranks is not None and _lost(r, ranks):
        found.append(f"on ranks it is only {ranks:.2f} (r_spearman): a few extreme values carry it")
    share, seen = _number(edge, "imputed_share"), _number(edge, "r_observed")
    if share is not None and share > MUCH_FILLED_IN:
        without = (
            "too few samples are left without them" if seen is None else f"without those r is {seen:.2f}"
        )
        found.append(f"one of the two values was filled in for {100 * share:.0f} % of the samples; {without}")
    stability = _number(edge, "stability")
    if stability is not None and stability < UNSTABLE:
        found.append(
            f"it is among the strongest pairs in only {100 * stability:.0f} % of the half-samples (stability)"
        )
    q = max(_number(edge, "q") or 0.0, _number(edge, "q_block") or 0.0)
    if q > fdr / 2.0:
        found.append(f"its false-discovery rate of {q:.2g} is close to the limit of {fdr:g}")
    return found


def _lost(r: float, other: float) -> bool:
    return other * r <= 0.0 or abs(other) < HALF * abs(r)


def _number(edge: Mapping[str, Any], key: str) -> float | None:
    value = edge.get(key)
    return None if value is None or pd.isna(value) else float(value)
