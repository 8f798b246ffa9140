"""Seconds and memory to learn and to apply a recipe: 20,000 x 300 counts, 5,000 x 300 intensities with 15 % gaps.

The intensities once as a plain table and once as runs with 40 pools in two batches, whose courses are worked out anew
for each run of the clock (a second fold would find them worked out). Memory is the most that the recipe
held beside the table, in multiples of the table, in a run of its own.

Run ``python tests/benchmarks/prepare_speed.py [SAMPLES]``.

Measured on two cores shared with eight others (wall clock, best of three): counts 0.6 to 1.1 s, 1.6 times the table;
intensities with 15 % gaps 1.2 to 2.7 s, 3.7 times; with 40 pools 9.8 s at a load of eight, 3.6 times.
"""

from __future__ import annotations

import sys
import time
import tracemalloc
from dataclasses import replace

import numpy as np

from workbench.prepare import MeasuredTable, RunTable, recipe_for
from workbench.prepare.drift_courses import answered


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


def with_pools(table: MeasuredTable, pools: int = 40) -> MeasuredTable:
    """Return the table as runs in two batches, drift and pools planted."""
    rng = np.random.default_rng(3)
    n, p = table.values.shape
    order = np.concatenate([np.linspace(0, 1000, n), np.linspace(0, 1000, pools)])
    middle = np.exp(rng.normal(12, 1.5, p)) * rng.lognormal(0, 0.1, (pools, p))
    values = np.vstack([table.values, middle]) * 2.0 ** (rng.normal(0, 0.5, p) * order[:, None] / 1000)
    names = tuple(f"run{k}" for k in range(n + pools))
    runs = RunTable(
        runs=names,
        sample=table.samples + ("",) * pools,
        role=("sample",) * n + ("pool",) * pools,
        order=order,
        batch=tuple("first" if place < 500 else "second" for place in order),
        replicate=("",) * len(names),
        values=values,
    )
    return replace(table, runs=runs)


def peak(values: str, table: MeasuredTable, smallest: int) -> float:
    """Return the most memory that fitting held beside the table, in multiples of it."""
    tracemalloc.start()
    recipe_for("a layer", values).fit(table, smallest_group=smallest, seed=1)
    most = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return most / (table.values.nbytes + (0 if table.runs is None else table.runs.values.nbytes))


def main(n: int = 300) -> None:
    """Print the best of three runs on the clock, for all samples and for the step of a cross-validation."""
    plain = intensities(n)
    for name, values, table in (
        ("counts", "counts", counts(n)),
        ("intensities", "intensities", plain),
        ("with pools", "intensities", with_pools(plain)),
    ):
        recipe, fit, apply = recipe_for("a layer", values), [], []
        for _ in range(3):
            answered.cache_clear()
            start = time.perf_counter()
            fitted = recipe.fit(table, smallest_group=n // 3, seed=1)
            middle = time.perf_counter()
            fitted.transform(table.take(range(n // 5)))
            fit.append(middle - start)
            apply.append(time.perf_counter() - middle)
        shape = " x ".join(f"{size:,}" for size in table.values.shape[::-1])
        print(
            f"{name:<12} {shape}: fit {min(fit):.2f} s, {n // 5} other samples {min(apply):.2f} s, "
            f"memory {peak(values, table, n // 3):.1f} times the table"
        )


if __name__ == "__main__":
    main(*(int(argument) for argument in sys.argv[1:]))
