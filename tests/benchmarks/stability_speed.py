"""Time of the stability of edges against as many bare single-precision products of half the samples.

``env -u OPENBLAS_CORETYPE -u OPENBLAS_L2_SIZE python tests/benchmarks/stability_speed.py [--halves 100]``:
the bare product writes every tile to one buffer and looks at none.

Times are of the processor, the bare products measured before and after. Measured with other work on both cores (load
7), one thread, 20 halves, twice: n = 100, 10,000 x 10,000 ratio 1.38, 1.39; n = 60, 20,000 x 5,000 1.51, 1.53;
n = 100, 5,000 x 2,000 1.86, 1.88; n = 96, 3,000 x 250 6.6, 6.7 (5 ms a half: what is not a product weighs more). Where
private variation is told anew in each half, telling it is most of the time: 0.55 s a half at 100 x (10,000 + 10,000)
with seven private factors, 5.9 times the product, 0.42 s at 60 x (20,000 + 5,000), 0.18 s at 96 x (3,000 + 250).
"""

from __future__ import annotations

import argparse
import time

import numpy as np

from workbench.engine import BlockPair, HalfScreen, Limits, half_samples, pair_stability, screen_pairs

LIMITS = Limits()
SIZES = ((96, 3000, 250), (100, 5000, 2000), (60, 20_000, 5000), (100, 10_000, 10_000))


def main() -> None:
    """Print times and their ratio for several sizes."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--halves", type=int, default=100)
    halves = parser.parse_args().halves
    for n, p, q in SIZES:
        x, y = _blocks(n, p, q)
        screen = screen_pairs(x, y, maximum_edges=20_000)
        edges = np.column_stack([np.zeros_like(screen.i), screen.i, screen.j])
        parts = half_samples(n, None, None, halves, 0)
        bare = _all_bare(parts, x, y)
        start = time.process_time()
        found = pair_stability(
            n, None, None, halves, HalfScreen([BlockPair("a", x, y)], [np.arange(n)]), edges
        )
        ours = time.process_time() - start
        bare = (bare + _all_bare(parts, x, y)) / 2.0
        print(
            f"n = {n}, {p:,} x {q:,}: {len(edges):,} edges, mean share {found.share.mean():.2f}; bare products "
            f"{bare:.2f} s, stability {ours:.2f} s, ratio {ours / bare:.2f}",
            flush=True,
        )


def _blocks(n: int, p: int, q: int) -> tuple[np.ndarray, np.ndarray]:
    """Noise with ten modules of 60 and 30 features."""
    rng = np.random.default_rng(1)
    x, y = rng.normal(size=(n, p)), rng.normal(size=(n, q))
    for k in range(10):
        shared = 1.5 * rng.normal(size=(n, 1))
        x[:, 60 * k : 60 * k + 60] += shared
        y[:, 24 * k : 24 * k + 24] += shared
    return x, y


def _all_bare(parts: list[np.ndarray], x: np.ndarray, y: np.ndarray) -> float:
    """Return the processor time of the bare products of all halves."""
    start = time.process_time()
    for rows in parts:
        _bare(*(np.ascontiguousarray(side[rows].T, dtype=np.float32) for side in (x, y)))
    return time.process_time() - start


def _bare(x: np.ndarray, y: np.ndarray) -> None:
    room = np.empty((LIMITS.outer, LIMITS.inner), dtype=np.float32)
    for a in range(0, len(x), LIMITS.outer):
        for b in range(0, len(y), LIMITS.inner):
            left, right = x[a : a + LIMITS.outer], y[b : b + LIMITS.inner]
            np.matmul(left, right.T, out=room.reshape(-1)[: len(left) * len(right)].reshape(len(left), -1))


if __name__ == "__main__":
    main()
