"""Seconds and memory to read text tables of 20,000 features x 300 samples, beside `pandas.read_csv` on the same file.

Run ``python tests/benchmarks/intake_speed.py [FEATURES SAMPLES]``. pandas reads with
``float_precision="round_trip"``, which is as exact; it checks no field counts, no ids and no ranges, and does not
align.
"""

from __future__ import annotations

import sys
import tempfile
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from workbench.intake import delivered_table

Cell = Callable[[float], str]


def tables(rng: np.random.Generator, n: int, p: int) -> dict[str, tuple[np.ndarray, Cell, str]]:
    """Return arrays (features x samples), how a number is written, and what the values are."""
    readings = np.exp(2 * rng.normal(size=(p, n)))
    counts = rng.negative_binomial(1, 0.01, size=(p, n)).astype(float)
    gaps = np.where(rng.random((p, n)) < 0.2, np.nan, readings)
    return {
        "readings": (readings, repr, "continuous"),
        "readings, 20 % NA": (gaps, repr, "intensities"),
        "counts": (counts, lambda x: str(int(x)), "counts"),
        "counts, 5 % NA": (
            np.where(rng.random((p, n)) < 0.05, np.nan, counts),
            lambda x: str(int(x)),
            "counts",
        ),
    }


def write(path: Path, array: np.ndarray, text: Cell) -> None:
    """Write a TSV file of features in rows."""
    with path.open("w") as file:
        file.write("\t".join(["feature", *(f"S{k}" for k in range(array.shape[1]))]) + "\n")
        for i, row in enumerate(array.tolist()):
            cells = ("NA" if x != x else text(x) for x in row)
            file.write("\t".join([f"gene_{i}", *cells]) + "\n")


def best(work: Callable[[], Any], times: int = 3) -> tuple[float, Any]:
    """Return the least processor time of several runs, and what the last one returned."""
    spent = []
    for _ in range(times):
        start = time.process_time()
        result = work()
        spent.append(time.process_time() - start)
    return min(spent), result


def most_memory(work: Callable[[], Any]) -> int:
    """Return the most bytes that stood in memory at once during one run."""
    tracemalloc.start()
    work()
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return peak


def main(p: int = 20_000, n: int = 300) -> None:
    """Print a line for each kind of table."""
    for name, (array, text, values) in tables(np.random.default_rng(1), n, p).items():
        with tempfile.TemporaryDirectory() as folder:
            path = Path(folder) / "t.tsv"
            write(path, array, text)
            ids = [f"S{k}" for k in range(n)]
            theirs, frame = best(
                lambda path=path: pd.read_csv(path, sep="\t", index_col=0, float_precision="round_trip")
            )
            ours, table = best(
                lambda path=path, ids=ids, v=values: delivered_table(path, sample_ids=ids, values=v)
            )
            np.testing.assert_array_equal(table.values.to_numpy(), frame.to_numpy(dtype=float).T)
            size = path.stat().st_size / 1e6
            peak = most_memory(
                lambda path=path, ids=ids, v=values: delivered_table(path, sample_ids=ids, values=v)
            )
            print(
                f"{name:<18} {size:6.0f} MB   pandas {theirs:5.2f} s   intake {ours:5.2f} s   "
                f"x {ours / theirs:.2f}   memory x {peak / array.nbytes:.2f} of the array"
            )


if __name__ == "__main__":
    main(*map(int, sys.argv[1:]))
