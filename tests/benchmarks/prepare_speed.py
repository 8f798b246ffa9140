"""Seconds to learn and to apply a recipe: 20,000 x 300 counts, 5,000 x 300 intensities with 15 % gaps.

Run ``python tests/benchmarks/prepare_speed.py [SAMPLES]``.
"""

from __future__ import annotations

import sys
import time

import numpy as np

from workbench.prepare import MeasuredTable, recipe_for


def named(values: np.ndarray) -> MeasuredTable:
    """Return the values with invented names."""
    n, p = values.shape
    return MeasuredTable(values, tuple(f"S{i}" for i in range(n)), tuple(f"F{j}" for j in range(p)))


def counts(n: int, p: int = 20_000) -> MeasuredTable:
    """Return counts of unequal depth."""
    rng = np.random.default_rng(1)
    means = rng.lognormal(3, 2, p) * rng.lognormal(0, 0.3, (n, 1)) * rng.lognormal(0, 0.4, (n, p))
    return named(rng.poisson(means).astype(float))


def intensities(n: int, p: int = 5_000, gaps: float = 0.15) -> MeasuredTable:
    """Return intensities; four in five gaps lie under a detection limit."""
    rng = np.random.default_rng(2)
    logs = rng.normal(17, 2, p) + rng.normal(0, 0.7, (n, p)) + rng.normal(0, 0.5, (n, 1))
    lost = (logs < np.quantile(logs, 0.8 * gaps)) | (rng.random((n, p)) < 0.2 * gaps)
    return named(np.where(lost, np.nan, 2.0**logs))


def main(n: int = 300) -> None:
    """Print the best of three runs on the clock, for all samples and for the step of a cross-validation."""
    for values, table in (("counts", counts(n)), ("intensities", intensities(n))):
        recipe, fit, apply = recipe_for("a layer", values), [], []
        for _ in range(3):
            start = time.perf_counter()
            fitted = recipe.fit(table, smallest_group=n // 3, seed=1)
            middle = time.perf_counter()
            fitted.transform(table.take(range(n // 5)))
            fit.append(middle - start)
            apply.append(time.perf_counter() - middle)
        shape = " x ".join(f"{size:,}" for size in table.values.shape[::-1])
        print(f"{values:<12} {shape}: fit {min(fit):.2f} s, {n // 5} other samples {min(apply):.2f} s")


if __name__ == "__main__":
    main(*(int(argument) for argument in sys.argv[1:]))
