"""Seconds for ridge canonical pairs and their test beside one fit of scikit-learn's CCA and PLSCanonical.

100 samples of 20,000 and 5,000 features. Seen in one process (seconds of processor, one thread, three runs on a busy
machine): fit with "auto" 0.17 to 0.18 and 1,000 permutations 0.26 to 0.28, together 0.44 to 0.46; scikit-learn CCA
0.53 to 0.64 (0.82 with the machine at rest), PLSCanonical 0.43 to 0.46 (0.39). With a decomposition at each of nine
ridges, and folds prepared feature by feature, fit and permutations took 0.34 and 2.81. 300 samples of 20,000 and
20,000 features: fit 1.9, 1,000 permutations 4.4, peak 0.43 GB.

Run: python tests/benchmarks/canonical_speed.py
"""

from __future__ import annotations

import time
import tracemalloc
import warnings
from collections.abc import Callable

import numpy as np
from sklearn.cross_decomposition import CCA, PLSCanonical

from workbench.engine import (
    RegularisedCCA,
    array_source,
    canonical_pair_test,
    cross_validated_correlations,
)

N, P, Q = 100, 20_000, 5_000


def measure(what: str, work: Callable[[], object]) -> None:
    """Print the best of three wall times and the processor time of that run."""
    runs = []
    for _ in range(3):
        wall, cpu = time.perf_counter(), time.process_time()
        work()
        runs.append((time.perf_counter() - wall, time.process_time() - cpu))
    wall, cpu = min(runs)
    print(f"{what:55s}{wall:8.2f} s{cpu:8.2f} s of processor", flush=True)


def main() -> None:
    """Print the table."""
    warnings.simplefilter("ignore")
    rng = np.random.default_rng(0)
    shared = rng.normal(size=(N, 1))
    x, y = rng.normal(size=(N, P)), rng.normal(size=(N, Q))
    x[:, :200] += shared
    y[:, :50] += shared
    measure("RegularisedCCA(2, ridge=1.0).fit", lambda: RegularisedCCA(2, ridge=1.0).fit(x, y))
    measure("RegularisedCCA(2, ridge='auto').fit", lambda: RegularisedCCA(2, random_state=0).fit(x, y))
    measure(
        "canonical_pair_test, 1,000 permutations",
        lambda: canonical_pair_test(x, y, permutations=1000, random_state=0, early_stop=False),
    )
    measure(
        "cross_validated_correlations, 5 folds x 5 repeats",
        lambda: cross_validated_correlations(array_source(x, y), N),
    )
    measure("scikit-learn PLSCanonical(2).fit", lambda: PLSCanonical(2).fit(x, y))
    measure("scikit-learn CCA(2).fit", lambda: CCA(2).fit(x, y))
    tracemalloc.start()
    RegularisedCCA(2, random_state=0).fit(x, y)
    peak = tracemalloc.get_traced_memory()[1] / (x.nbytes + y.nbytes)
    print(f"peak memory of the fit with 'auto': {peak:.1f} times the two arrays")


if __name__ == "__main__":
    main()
