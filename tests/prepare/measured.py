"""Measured tables of every kind, small and invented, all of them read-only."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from workbench.prepare import MeasuredTable, RunTable
from workbench.prepare.tables import Levels, StepTable

KINDS = ("counts", "intensities", "log", "proportions", "beta", "continuous", "mixed")


def table_of(values: np.ndarray, levels: Levels | None = None, prefix: str = "F") -> MeasuredTable:
    """Return a table with invented names; writing into its values fails."""
    values = np.array(values, dtype=np.float64)
    values.flags.writeable = False
    samples = tuple(f"S{row:03d}" for row in range(len(values)))
    return MeasuredTable(
        values, samples, tuple(f"{prefix}{column}" for column in range(values.shape[1])), levels
    )


def step_table(values: np.ndarray, scale: np.ndarray | None = None) -> StepTable:
    """Return the same as a table between steps, with the scale taken from each sample so far."""
    start = StepTable.of(table_of(values))
    return start if scale is None else start.shifted(np.asarray(scale)).with_values(start.values)


def factor_logs(rng: np.random.Generator, n: int, p: int) -> np.ndarray:
    """Return values of sd 1, half of the variance from three factors."""
    factors = rng.standard_normal((n, 3)) @ rng.standard_normal((3, p)) / np.sqrt(3)
    return np.sqrt(0.5) * (factors + rng.standard_normal((n, p)))


def counts(seed: int = 0, n: int = 14, p: int = 150) -> MeasuredTable:
    """Return counts of unequal depth, some features rare, one empty and one constant."""
    rng = np.random.default_rng(seed)
    means = rng.lognormal(4.0, 1.5, p) * rng.lognormal(0, 0.4, (n, 1))
    values = rng.poisson(means * np.exp(0.4 * factor_logs(rng, n, p))).astype(float)
    values[:, 0], values[:, 1] = 0.0, 25.0
    return table_of(values)


def limited_logs(
    rng: np.random.Generator, n: int, p: int, dilution: float = 0.5, random: float = 0.02
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return log2 amounts, each sample's log2 dilution, and the mask of values lost to limit or chance."""
    logs = 16 + rng.normal(0, 2, p) + 0.7 * factor_logs(rng, n, p)
    dilutions = rng.normal(0, dilution, n)
    read = logs + dilutions[:, None]
    lost = (read < np.quantile(read, 0.12)) | (rng.random((n, p)) < random)
    return logs, dilutions, lost


def intensities(seed: int = 0, n: int = 14, p: int = 150) -> MeasuredTable:
    """Return intensities with a detection limit; lost values are empty or zero."""
    rng = np.random.default_rng(seed)
    logs, dilutions, lost = limited_logs(rng, n, p)
    values = 2.0 ** (logs + dilutions[:, None])
    values[lost] = np.where(rng.random(lost.sum()) < 0.5, 0.0, np.nan)
    return table_of(values)


def log(seed: int = 0, n: int = 14, p: int = 150) -> MeasuredTable:
    """Return logarithms with the same losses."""
    logs, dilutions, lost = limited_logs(np.random.default_rng(seed), n, p)
    return table_of(np.where(lost, np.nan, logs + dilutions[:, None]))


def continuous(seed: int = 0, n: int = 14, p: int = 40) -> MeasuredTable:
    """Return readings with gaps anywhere."""
    rng = np.random.default_rng(seed)
    values = 50 + 10 * factor_logs(rng, n, p)
    return table_of(np.where(rng.random((n, p)) < 0.1, np.nan, values))


def proportions(seed: int = 0, n: int = 14, p: int = 60) -> MeasuredTable:
    """Return shares of a whole with zeros and a few gaps."""
    rng = np.random.default_rng(seed)
    counts = rng.poisson(rng.lognormal(2.0, 2.0, p) * np.exp(0.8 * factor_logs(rng, n, p))).astype(float)
    values = counts / counts.sum(axis=1, keepdims=True)
    return table_of(np.where(rng.random((n, p)) < 0.02, np.nan, values))


def beta(seed: int = 0, n: int = 14, p: int = 100) -> MeasuredTable:
    """Return methylated shares with gaps, some of them exactly 0 or 1."""
    rng = np.random.default_rng(seed)
    values = 1.0 / (1.0 + np.exp(-rng.normal(0, 2, p) - 0.5 * factor_logs(rng, n, p)))
    values[rng.random((n, p)) < 0.02] = 0.0
    values[rng.random((n, p)) < 0.02] = 1.0
    return table_of(np.where(rng.random((n, p)) < 0.05, np.nan, values))


def mixed(seed: int = 0, n: int = 14, p: int = 8) -> MeasuredTable:
    """Return numbers and text of two and of three levels, in turn, with gaps."""
    rng = np.random.default_rng(seed)
    values = np.round(50 + 10 * rng.standard_normal((n, p)))
    levels: list[tuple[str, ...] | None] = [None] * p
    for column in range(p):
        names = (None, ("no", "yes"), ("high", "low", "mid"))[column % 3]
        levels[column] = names
        if names:
            values[:, column] = rng.permutation(np.arange(n) % len(names))
    values[rng.random((n, p)) < 0.05] = np.nan
    return table_of(values, tuple(levels))


BUILDERS: dict[str, Callable[..., MeasuredTable]] = {
    "counts": counts,
    "intensities": intensities,
    "log": log,
    "proportions": proportions,
    "beta": beta,
    "continuous": continuous,
    "mixed": mixed,
}


def with_runs(
    table: MeasuredTable,
    values: np.ndarray | None = None,
    copies: int = 1,
    pools: int = 0,
    blanks: int = 0,
    controls: np.ndarray | None = None,
) -> MeasuredTable:
    """Return the table with a run sheet: each sample run ``copies`` times, then pools and blanks.

    ``values`` are those of the sample runs (all samples once, then all again ...), ``controls`` those of pools and
    blanks; the order is the place in this list.
    """
    n = len(table.samples)
    rows = np.tile(table.values, (copies, 1)) if values is None else values
    extra = np.ones((pools + blanks, table.values.shape[1])) if controls is None else controls
    names = [f"{name}_{copy}" for copy in range(copies) for name in table.samples]
    names += [f"pool{k}" for k in range(pools)] + [f"blank{k}" for k in range(blanks)]
    role = ("sample",) * (n * copies) + ("pool",) * pools + ("blank",) * blanks
    runs = RunTable(
        runs=tuple(names),
        sample=table.samples * copies + ("",) * (pools + blanks),
        role=role,
        order=np.arange(len(names), dtype=float),
        batch=("",) * len(names),
        replicate=("",) * len(names),
        values=np.vstack([rows, extra]),
    )
    return replace(table, runs=runs)
