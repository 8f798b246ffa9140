"""Time and memory of a screen of two HDF5 datasets that are read in slices.

``python tests/benchmarks/screen_files.py [--first 200000] [--second 40000] [--samples 100]`` writes both blocks
into a temporary file, slice by slice, and screens them: 8e9 pairs by default.

Measured with other work on both cores (load 10), one thread: 8,000,000,000 pairs on 100 samples in 72 s, peak memory
of the process 433 MB (215 MB before the screen).
"""

from __future__ import annotations

import argparse
import resource
import tempfile
import time
from pathlib import Path

import h5py
import numpy as np

from workbench.engine import screen_pairs
from workbench.engine.pairs.workers import allowed_threads

SLICE = 5000


def main() -> None:
    """Write, screen, and print time and peak memory."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--first", type=int, default=200_000)
    parser.add_argument("--second", type=int, default=40_000)
    parser.add_argument("--samples", type=int, default=100)
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder, h5py.File(Path(folder) / "blocks.h5", "w") as file:
        shared = np.random.default_rng(0).normal(size=(asked.samples, 1))
        for name, features in (("x", asked.first), ("y", asked.second)):
            write(file, name, features, shared)
        before = peak()
        start = time.perf_counter()
        screen = screen_pairs(file["x"], file["y"], maximum_edges=20_000)
        took = time.perf_counter() - start
        print(
            f"{screen.tested:,} pairs on {asked.samples} samples, {screen.passed:,} pass: {took:.1f} s with "
            f"{allowed_threads()} threads, peak memory {peak():.0f} MB ({before:.0f} MB before)"
        )


def write(file: h5py.File, name: str, features: int, shared: np.ndarray) -> None:
    """Noise, and a module of 100 features that follow ``shared``."""
    n = len(shared)
    data = file.create_dataset(name, (n, features), dtype="f8", chunks=(n, 1000))
    for number, start in enumerate(range(0, features, SLICE)):
        stop = min(start + SLICE, features)
        block = np.random.default_rng([ord(name), number]).normal(size=(n, stop - start))
        if start == 0:
            block[:, :100] += 1.5 * shared
        data[:, start:stop] = block


def peak() -> float:
    """Peak memory of this process in MB."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1000.0


if __name__ == "__main__":
    main()
