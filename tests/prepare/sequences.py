"""Invented runs in sequence: pools between samples, drift, batches, and what the samples would be without."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from workbench.prepare import MeasuredTable, RunTable, run_table

NOISE = 0.12


@dataclass(frozen=True)
class Sequence:
    """A table with runs, and the truth: biology (n, p), log2 base (p,) and drift of the sample runs (n, p)."""

    table: MeasuredTable
    biology: np.ndarray
    base: np.ndarray
    drift: np.ndarray


def sequence(
    seed: int = 0,
    n: int = 60,
    p: int = 300,
    every: int = 8,
    drift: float = 0.5,
    batches: int = 1,
    steps: float = 0.0,
    outer: bool = True,
) -> Sequence:
    """Return samples run in order with a pool before, after (unless not ``outer``) and after every ``every`` of them.

    On the log2 scale: drift of random slope and bend per feature, steps between batches, noise of 0.12 per run.
    """
    rng = np.random.default_rng(seed)
    roles = [_roles(n // batches, every, outer) for _ in range(batches)]
    role = np.array([name for part in roles for name in part])
    batch = np.repeat([f"b{k}" for k in range(batches)], [len(part) for part in roles])
    place = np.concatenate([np.linspace(-1, 1, len(part)) for part in roles])[:, None]
    base = rng.normal(16, 2, p)
    moved = drift * (rng.normal(-1, 1, p) * place + 0.5 * rng.standard_normal(p) * (place**2 - 1 / 3))
    moved += (steps * rng.standard_normal((batches, p)))[
        np.repeat(np.arange(batches), [len(x) for x in roles])
    ]
    biology = 0.6 * rng.standard_normal((n, p))
    logs = base + moved + NOISE * rng.standard_normal(moved.shape)
    sampled = role == "sample"
    logs[sampled] += biology
    return _sequence(2.0**logs, role, batch, biology, base, moved[sampled])


def _roles(n: int, every: int, outer: bool) -> list[str]:
    roles = ["pool"] if outer else ["sample", "pool"]
    for place in range(1, n + 1 if outer else n):
        roles.append("sample")
        if place % every == 0 or (outer and place == n):
            roles.append("pool")
    return roles


def _sequence(
    values: np.ndarray,
    role: np.ndarray,
    batch: np.ndarray,
    biology: np.ndarray,
    base: np.ndarray,
    drift: np.ndarray,
) -> Sequence:
    samples = [f"S{k:03d}" for k in range(len(biology))]
    named = iter(samples)
    sheet = pd.DataFrame(
        {
            "sample": [next(named) if part == "sample" else "" for part in role],
            "role": role,
            "order": np.arange(len(role)),
            "batch": batch,
        },
        index=[f"run{k}" for k in range(len(role))],
    )
    features = tuple(f"F{k}" for k in range(values.shape[1]))
    runs = run_table(sheet, values)
    table = MeasuredTable(values[role == "sample"], tuple(samples), features, None, runs)
    return Sequence(table, biology, base, drift)


def with_controls(kind: str) -> MeasuredTable:
    """Return runs with drift, a detection limit, dilution, features that scatter, and two blanks."""
    made = sequence(seed=1, n=40, p=120, every=4, drift=0.4).table
    rng, runs = np.random.default_rng(2), made.runs
    assert runs is not None
    sampled = np.array(runs.role)[:, None] == "sample"
    scatter = np.where(np.arange(120) % 5, 0.1, 0.35)
    logs = np.log2(runs.values) + rng.normal(0, scatter, runs.values.shape) * ~sampled
    logs += sampled * rng.normal(0, 0.4, (len(logs), 1))
    blanks = 2.0 ** np.median(logs, axis=0) / np.where(np.arange(120) % 6, 100.0, 2.0)
    logs[(logs < np.quantile(logs, 0.12)) & sampled] = np.nan
    values = np.nan_to_num(2.0**logs)
    grown = RunTable(
        runs=(*runs.runs, "blank0"),
        sample=(*runs.sample, ""),
        role=(*runs.role, "blank"),
        order=np.append(runs.order, 0.0),
        batch=(*runs.batch, "b0"),
        replicate=(*runs.replicate, ""),
        values=np.vstack([values, blanks]),
    )
    if kind == "log":
        grown = replace(grown, values=np.vstack([logs, np.log2(blanks)]))
    return replace(made, values=grown.values[grown.rows_as("sample")], runs=grown)
