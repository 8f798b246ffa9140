"""Two yardsticks for any screen: the route by hand, and an oracle that knows the private factors."""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np
import pandas as pd
from scipy import stats

from .design import Block
from .sheet import design_matrix
from .study import PairName, Study, Truth

LEVELS = {"no": 0.0, "yes": 1.0, "low": 0.0, "mid": 1.0, "high": 2.0}
"""Numbers for the text of clinical readings."""

SEEN = 0.2
"""Smallest share of the samples that must have a feature: a count of 10, or any value of another kind."""


class Score(NamedTuple):
    """How good a selection of pairs is."""

    recall: float
    false_discoveries: float


def by_hand(study: Study, fdr: float = 0.05) -> dict[PairName, np.ndarray]:
    """Return the pairs found by hand: log, regress the design out, Pearson, Benjamini-Hochberg over all pairs."""
    return _screen(study, dict.fromkeys(study.blocks), fdr)


def oracle(study: Study, fdr: float = 0.05) -> dict[PairName, np.ndarray]:
    """Return the pairs found by hand when each block's private factors are known and regressed out of it.

    Removal that never looks at the other block costs no degrees of freedom: the other block's feature is
    independent of the removed directions.
    """
    return _screen(study, study.truth.private, fdr)


def correlations(study: Study, pair: PairName, private: bool = False) -> tuple[np.ndarray, int]:
    """Return all correlations of two blocks, shape (p, q), after the design (and private factors), and n - c - 1.

    A feature without variance has NaN.
    """
    common = study.common_samples(*pair)
    known = design_matrix(study.samples.loc[common], *pair)
    residuals = []
    for block in study.design.blocks:
        if block.name in pair:
            scores = study.truth.private[block.name].loc[common] if private else None
            residuals.append(_unit_residuals(logs(study, block).loc[common].to_numpy(), known, scores))
    return residuals[0].T @ residuals[1], len(common) - known.shape[1] - 1


def _unit_residuals(x: np.ndarray, known: np.ndarray, private: pd.DataFrame | None) -> np.ndarray:
    """Return residuals of the design and private factors, of length 1 in each column (NaN without variance)."""
    if private is not None:
        known = np.linalg.qr(np.hstack([known, private.to_numpy()]))[0]
    rest = x - known @ (known.T @ x)
    length = np.linalg.norm(rest, axis=0)
    return np.asarray(rest / np.where(length > 1e-8 * np.linalg.norm(x, axis=0), length, np.nan))


def logs(study: Study, block: Block) -> pd.DataFrame:
    """Return a block as an analyst would take it by hand, samples x features without gaps.

    Counts and intensities on a log2 scale, each sample less the median of its differences from the features'
    medians; a zero count becomes 0.5; gaps become half of the feature's smallest value, or its median where
    the values do not fall to a detection limit. A feature that too few samples have (`SEEN`) is 0 throughout.
    """
    table = study.aligned(block.name)
    if block.values == "mixed":
        table = table.apply(lambda column: column.map(LEVELS) if column.dtype == object else column)
    x = table.to_numpy(dtype=float)
    x[:, np.mean(x >= _least(block), axis=0) < SEEN] = np.nan
    if block.values in ("mixed", "continuous"):
        x = np.where(np.isnan(x), _median(x), x)
    else:
        x = _levelled(x if block.values == "log" else _log2(x), block.values)
    return pd.DataFrame(np.nan_to_num(x, nan=0.0), index=table.index, columns=table.columns)


def _least(block: Block) -> float:
    """Return the smallest value that counts as seen: ten reads, any read of a composition, any reading."""
    if not block.counted:
        return -np.inf
    return 1e-12 if block.closed or block.values == "proportions" else 10.0


def _levelled(x: np.ndarray, values: str) -> np.ndarray:
    """Return logs, each sample less its own level, with gaps filled from below."""
    level = _median((x - _median(x)).T)[:, np.newaxis]
    if values == "counts":
        seen = ~np.isnan(x).all(axis=0)
        return np.where(np.isnan(x) & seen, np.log2(0.5), x) - level
    lowest = np.nan_to_num(x - level, nan=np.inf).min(axis=0)
    return np.where(np.isnan(x), np.where(np.isinf(lowest), np.nan, lowest - 1), x - level)


def _log2(x: np.ndarray) -> np.ndarray:
    """Return base-2 logs of what is above 0, NaN for the rest."""
    return np.asarray(np.log2(np.where(x > 0, x, np.nan)))


def _median(x: np.ndarray) -> np.ndarray:
    """Return the columns' medians of what is there, NaN for nothing."""
    count = np.isfinite(x).sum(axis=0)
    ordered, column = np.sort(x, axis=0), np.arange(x.shape[1])
    lower, upper = np.maximum(count - 1, 0) // 2, np.minimum(count // 2, len(x) - 1)
    return np.asarray((ordered[lower, column] + ordered[upper, column]) / 2)


def _screen(
    study: Study, private: Mapping[str, pd.DataFrame | None], fdr: float
) -> dict[PairName, np.ndarray]:
    """Return the pairs that pass Benjamini & Hochberg 1995 (JRSS B 57:289) over all pairs of the study."""
    p_values = {}
    for pair in study.truth.pairs:
        known = all(private[name] is not None for name in pair)
        p_values[pair] = _p_values(*correlations(study, pair, private=known), fdr)
    p = np.concatenate([p[np.isfinite(p)] for p in p_values.values()])
    small = np.sort(p[p <= fdr])
    passed = np.flatnonzero(small <= fdr * np.arange(1, len(small) + 1) / len(p))
    limit = small[passed[-1]] if len(passed) else -1.0
    return {pair: np.argwhere(p <= limit) for pair, p in p_values.items()}


def _p_values(r: np.ndarray, freedom: int, fdr: float) -> np.ndarray:
    """Return two-sided p of Pearson correlations (NaN stays); one above `fdr` is given as 1, to save time."""
    t = np.abs(r) * np.sqrt(freedom / np.maximum(1 - r**2, 1e-300))
    p = np.where(np.isnan(t), np.nan, 1.0)
    low = t >= stats.t.isf(fdr / 2, freedom)
    p[low] = 2 * stats.t.sf(t[low], freedom)
    return p


def score(selected: Mapping[PairName, np.ndarray], truth: Truth) -> Score:
    """Return recall and false-discovery proportion over all block pairs.

    `selected` holds pairs of columns of the delivered tables, shape (k, 2), under (block, other block); see
    `Study.positions` for names. Nothing true: the recall is NaN; nothing selected: no false discoveries.
    """
    found = {(pair, i, j) for pair, rows in selected.items() for i, j in np.asarray(rows).tolist()}
    true = {(pair, i, j) for pair, rows in truth.pairs.items() for i, j in rows.tolist()}
    right = len(found & true)
    return Score(right / len(true) if true else float("nan"), 1 - right / len(found) if found else 0.0)
