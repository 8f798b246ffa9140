"""The screen as a textbook has it: whole matrices in double precision, every p, then Benjamini-Hochberg."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import stats

from workbench.engine import BlockPair, benjamini_hochberg


@dataclass(frozen=True)
class Untiled:
    """Matrices of one pair of blocks."""

    r: np.ndarray
    p: np.ndarray
    q: np.ndarray
    q_block: np.ndarray


def untiled_screen(pairs: list[BlockPair], correlation: str = "pearson") -> list[Untiled]:
    """Correlations, p, q over all pairs and q over each pair of blocks; NaN where nothing can be tested."""
    matrices = [_correlations(pair, correlation) for pair in pairs]
    pooled = benjamini_hochberg(np.concatenate([p.ravel() for _, p in matrices]))
    ends = np.cumsum([p.size for _, p in matrices])[:-1]
    return [
        Untiled(r, p, q.reshape(p.shape), benjamini_hochberg(p))
        for (r, p), q in zip(matrices, np.split(pooled, ends), strict=True)
    ]


def untiled_edges(screens: list[Untiled], fdr: float, minimum_r: float = 0.0) -> set[tuple[int, int, int]]:
    """(pair of blocks, i, j) of all edges."""
    edges = set()
    for k, one in enumerate(screens):
        passing = (one.q <= fdr) & (one.q_block <= fdr) & (np.abs(one.r) >= minimum_r - 1e-12)
        edges |= {(k, int(i), int(j)) for i, j in np.argwhere(passing)}
    return edges


def _correlations(pair: BlockPair, correlation: str) -> tuple[np.ndarray, np.ndarray]:
    n = pair.x.shape[0]
    design = np.column_stack([np.ones(n), *([] if pair.nuisance is None else [pair.nuisance])])
    x, y = (_unit_residuals(side, design, correlation) for side in (pair.x, pair.y))
    r = np.clip(x.T @ y, -1.0, 1.0)
    # Rounding alone separates these from a perfect correlation.
    r = np.where(np.abs(r) >= 1.0 - n * 2.0**-53, np.sign(r), r)
    df = n - np.linalg.matrix_rank(design) - 1
    with np.errstate(divide="ignore"):
        t = np.abs(r) * np.sqrt(df / ((1.0 - np.abs(r)) * (1.0 + np.abs(r))))
    return r, 2.0 * stats.t.sf(t, df)


def _unit_residuals(side: np.ndarray, design: np.ndarray, correlation: str) -> np.ndarray:
    whole = np.isfinite(side).all(axis=0)
    values = np.where(whole, side, 0.0)
    if correlation == "spearman":
        values = stats.rankdata(values, axis=0)
    residual = values - design @ np.linalg.lstsq(design, values, rcond=None)[0]
    length = np.linalg.norm(residual, axis=0)
    testable = whole & (length > 1e-10 * np.linalg.norm(values, axis=0))
    return np.where(testable, residual / np.where(testable, length, 1.0), np.nan)
