"""Principal components of wide blocks against scikit-learn's fastest fitting solver, one process.

Run with one BLAS thread: OPENBLAS_NUM_THREADS=1 python tests/benchmarks/components_speed.py. Both sides keep
the same number of components; scikit-learn's solvers are all tried and its fastest counts, although the
randomised and the iterative one are approximate and ours is exact and gives all eigenvalues. Times are the best
of some runs, taken in turn.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import partial

import numpy as np
from sklearn.decomposition import PCA

from workbench.engine.look.components import PrincipalComponents

RUNS = 7


def best_times(tasks: dict[str, Callable[[], object]]) -> dict[str, float]:
    """Return each task's best time in seconds, the tasks run in turn so that load on the machine hits all."""
    times = dict.fromkeys(tasks, np.inf)
    for _ in range(RUNS):
        for name, task in tasks.items():
            start = time.perf_counter()
            task()
            times[name] = min(times[name], time.perf_counter() - start)
    return times


def solvers(n: int, kept: int) -> list[str]:
    """Return scikit-learn's solvers that fit n samples of many features."""
    return ["full", "randomized"] + (["arpack"] if kept < n else [])


def tasks(x: np.ndarray, kept: int) -> dict[str, Callable[[], object]]:
    """Return the fits to be timed."""
    theirs = {s: partial(PCA(kept, svd_solver=s, random_state=0).fit, x) for s in solvers(len(x), kept)}
    ours = {"ours": PrincipalComponents(kept, scale=False), "scaled": PrincipalComponents(kept)}
    return theirs | {name: partial(estimator.fit, x) for name, estimator in ours.items()}


def main() -> None:
    """Print one line per size and number of components."""
    rng = np.random.default_rng(0)
    print(
        f"{'block':>14} {'kept':>5} {'ours':>9} {'scaled':>9} {'theirs':>9} {'ratio':>6}  fastest solver of theirs"
    )
    for n in (60, 300):
        x = rng.normal(size=(n, 5)) @ rng.normal(size=(5, 20_000)) + rng.normal(size=(n, 20_000))
        for kept in (2, 5, 10, n - 1):
            times = best_times(tasks(x, kept))
            fastest = min(solvers(n, kept), key=lambda s: times[s])
            print(
                f"{f'{n} x 20,000':>14} {kept:>5} {times['ours']:>8.3f}s {times['scaled']:>8.3f}s "
                f"{times[fastest]:>8.3f}s {times['ours'] / times[fastest]:>6.2f}  {fastest}"
            )


if __name__ == "__main__":
    main()
