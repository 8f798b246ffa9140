"""Time of the pair screen against the bare single-precision product of the same tiles, in one process.

Run with ``env -u OPENBLAS_CORETYPE -u OPENBLAS_L2_SIZE python tests/benchmarks/screen_speed.py``: a kernel
chosen for another processor slows the product and flatters the ratio. Each round times the bare product and
then the screen; the ratio is that of the fastest rounds, with the median of the rounds' own ratios beside it. The
bare product is the faster of two: the library's own threads, and tiles shared out over as many threads (on a busy
machine the library's threads wait for each other and the former is up to five times slower).

Measured with other work on both cores (load 8 to 11; AMD EPYC, numpy 2.4.6), 1e8 pairs, n = 100, 9 rounds: one
thread 1.67 (nothing shared) and 1.73 (105,197 edges), two threads 1.44 and 1.60.
"""

from __future__ import annotations

import argparse
import resource
import statistics
import sys
import time
from collections.abc import Callable

import numpy as np
import threadpoolctl

from workbench.engine import Limits, PairScreen, screen_pairs
from workbench.engine.pairs.workers import share_out

MODULES, SIDE = 10, 100
LIMITS = Limits()


def blocks(features: int, n: int, *, true_edges: bool) -> tuple[np.ndarray, np.ndarray]:
    """Two blocks of noise; with true edges, ten modules of 100 x 100 features share a factor each."""
    rng = np.random.default_rng(1)
    x, y = rng.normal(size=(n, features)), rng.normal(size=(n, features))
    if true_edges:
        factors = np.repeat(rng.normal(size=(n, MODULES)), SIDE, axis=1)
        x[:, : MODULES * SIDE] += 1.5 * factors
        y[:, : MODULES * SIDE] += 1.5 * factors
    return x, y


def bare_product(x: np.ndarray, y: np.ndarray) -> None:
    """Every tile of the product, written to one buffer and never looked at."""
    room = np.empty((LIMITS.outer, LIMITS.inner), dtype=np.float32)
    for a in range(0, len(x), LIMITS.outer):
        for b in range(0, len(y), LIMITS.inner):
            np.matmul(x[a : a + LIMITS.outer], y[b : b + LIMITS.inner].T, out=room)


def shared_product(x: np.ndarray, y: np.ndarray) -> None:
    """Every tile of the product, each thread with a buffer of its own."""

    def part(number: int, parts: int) -> None:
        room = np.empty((LIMITS.outer, LIMITS.inner), dtype=np.float32)
        for a in range(number * LIMITS.outer, len(x), parts * LIMITS.outer):
            for b in range(0, len(y), LIMITS.inner):
                np.matmul(x[a : a + LIMITS.outer], y[b : b + LIMITS.inner].T, out=room)

    share_out(part, len(x) // LIMITS.outer)


def seconds(task: Callable[[], object]) -> float:
    """Wall time of one call."""
    start = time.perf_counter()
    task()
    return time.perf_counter() - start


def measure(label: str, x: np.ndarray, y: np.ndarray, rounds: int) -> PairScreen:
    """Print times and ratios of one case; give back its screen."""
    left, right = (np.ascontiguousarray(side.T, dtype=np.float32) for side in (x, y))
    times = [
        (
            min(seconds(lambda: bare_product(left, right)), seconds(lambda: shared_product(left, right))),
            seconds(lambda: screen_pairs(x, y)),
        )
        for _ in range(rounds)
    ]
    bare, whole = min(t[0] for t in times), min(t[1] for t in times)
    middle = statistics.median(t[1] / t[0] for t in times)
    screen = screen_pairs(x, y)
    print(
        f"{label}: {screen.tested:,} pairs, {screen.n_edges:,} edges; bare product {bare:.3f} s, "
        f"screen {whole:.3f} s, ratio {whole / bare:.2f} (median of rounds {middle:.2f})"
    )
    return screen


def main() -> None:
    """Measure the null case, the case with true edges, a crowded one, and the look-up of pairs."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--features", type=int, default=10_000)
    parser.add_argument("--samples", type=int, default=100)
    parser.add_argument("--rounds", type=int, default=7)
    asked = parser.parse_args()
    for library in threadpoolctl.threadpool_info():
        if library["user_api"] == "blas":
            print("{internal_api} {version}: {architecture}, {num_threads} threads".format(**library))
    for label, true_edges in (("null", False), ("true edges", True)):
        x, y = blocks(asked.features, asked.samples, true_edges=true_edges)
        screen = measure(label, x, y, asked.rounds)
    pairs = np.arange(asked.features - 1000, asked.features)
    took = seconds(lambda: screen.lookup(pairs, 5))
    print(f"first look-up of 1,000 pairs that did not pass: {took:.3f} s")
    common = np.random.default_rng(2).normal(size=(asked.samples, 1))
    crowd: list[PairScreen] = []
    took = seconds(lambda: crowd.append(screen_pairs(x + common, y + common, maximum_edges=20_000)))
    print(f"crowded: {crowd[0].passed:,} pairs pass, 20,000 are given; screen {took:.3f} s")
    unit = 1 if sys.platform == "darwin" else 1024
    print(
        f"peak memory of the process: {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * unit / 1e6:.0f} MB"
    )


if __name__ == "__main__":
    main()
