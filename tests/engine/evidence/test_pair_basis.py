"""What a pair rests on is told right where its kind was planted, and left open where nothing tells."""

from __future__ import annotations

import numpy as np

from workbench.engine.evidence.pair_basis import pair_basis
from workbench.engine.pairs.intervals import fisher_interval


def test_planted_pairs_are_told_right_where_anything_is_said() -> None:
    """Ends that share the group's difference alone; a weak correlation within beside it; a strong one."""
    rng = np.random.default_rng(5)
    n, draws, group = 96, 400, np.repeat([0.0, 3.0], 48)[:, None]
    for within, right in ((0.0, "group"), (0.3, "within"), (0.8, "within")):
        x = rng.normal(size=(n, draws))
        y = within * x + np.sqrt(1.0 - within**2) * rng.normal(size=(n, draws))
        total = _correlations((x + group) - (x + group).mean(axis=0), (y + group) - (y + group).mean(axis=0))
        centred = [
            side - np.where(group > 0, side[48:].mean(axis=0), side[:48].mean(axis=0)) for side in (x, y)
        ]
        inside = _correlations(*centred)
        low, high = fisher_interval(inside, n, 2)
        told = pair_basis(fisher_interval(inside, n, 2, error=0.001)[0] > 0.0, low, high, total)
        committed = told != "unclear"
        assert committed.mean() > 0.3
        assert np.mean(committed & (told != right)) <= 0.05


def test_nothing_is_said_of_few_samples_and_of_what_cannot_be_tested() -> None:
    low, high = fisher_interval(np.array([0.0, 0.1]), 12, 2)
    assert pair_basis(np.array([False, False]), low, high, np.array([0.9, 0.9])).tolist() == ["unclear"] * 2
    nothing = np.array([np.nan])
    assert pair_basis(np.array([False]), nothing, nothing, nothing).tolist() == ["unclear"]


def _correlations(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    return np.asarray((x * y).sum(axis=0) / np.sqrt((x**2).sum(axis=0) * (y**2).sum(axis=0)))
