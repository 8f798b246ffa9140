"""Sample amount that two layers share must not turn into correlation between them."""

from __future__ import annotations

import numpy as np
from prepare.measured import table_of
from scipy import stats

from workbench.prepare import recipe_for


def shared_amount(seed: int, n: int = 60) -> tuple[np.ndarray, np.ndarray]:
    """Return prepared counts and intensities of unrelated features, depth and dilution being one amount."""
    rng = np.random.default_rng(seed)
    amount = rng.normal(0, 0.6, (n, 1))
    means = 30 * rng.lognormal(0, 1.8, 1500)
    counts = rng.poisson(means * np.exp(amount) * rng.gamma(5.0, 0.2, (n, 1500)))
    logs = rng.normal(12, 1.5, 250) + 0.5 * rng.standard_normal((n, 250)) + amount
    lost = (logs < np.quantile(logs, 0.12)) | (rng.random(logs.shape) < 0.03)
    tables = {"counts": table_of(counts), "intensities": table_of(np.where(lost, np.nan, np.exp(logs)))}
    prepared = [
        recipe_for("x", kind).fit_transform(t, smallest_group=n // 2, seed=1) for kind, t in tables.items()
    ]
    return prepared[0].values, prepared[1].values


def test_p_values_between_layers_stay_uniform_under_a_shared_amount() -> None:
    """Five null studies; more than two with a discovery at 5 % has a chance of 0.1 %."""
    shares, with_discovery = [], 0
    for seed in range(5):
        left, right = (stats.zscore(values) for values in shared_amount(seed))
        r = left.T @ right / len(left)
        p = 2 * stats.t.sf(np.abs(r) * np.sqrt((len(left) - 2) / (1 - r**2)), len(left) - 2)
        shares.append([np.mean(p < level) / level for level in (0.05, 0.01, 0.001)])
        with_discovery += bool(np.any(stats.false_discovery_control(p.ravel()) <= 0.05))
    assert np.abs(np.mean(shares, axis=0) - 1.0).max() < 0.15
    assert with_discovery <= stats.binom(5, 0.05).isf(0.002)
