"""Speed and memory of multi-block PLS on 100 samples x (20,000 + 5,000) features; run by hand.

One fit against scikit-learn's PLSRegression on the same matrix in the same process (processor time, alternating),
and the whole of repeated double cross-validation (5 x 5, the inner folds dealt twice, 10 repeats, 8 components, every
set of blocks) with 200 permutations; a panel beside.

Measured on one thread of a busy machine (Python 3.11, numpy 2.4, scikit-learn 1.9): one fit 0.044 s of processor,
PLSRegression 0.049 s (medians of 9); validation 24 s of processor; one repeat of the search for a panel with 99
permutations 14 s; 0.69 GB.
"""

from __future__ import annotations

import resource
import time

import numpy as np
from sklearn.cross_decomposition import PLSRegression

from workbench.engine import ClassOutcome, MultiblockPLS, PanelSearch, block_source, double_validation
from workbench.engine.supervised.double_arrangements import outcome_arrangements

SIZES = (20_000, 5_000)


def main() -> None:
    """Measure and print."""
    rng = np.random.default_rng(0)
    ill = rng.permutation(np.arange(100) % 2)
    blocks = [rng.normal(size=(100, size)) for size in SIZES]
    blocks[0][:, :200] += 0.5 * ill[:, None]
    x = np.hstack(blocks)
    ours, theirs = [], []
    for _ in range(9):
        start = time.process_time()
        MultiblockPLS(8, block_sizes=SIZES).fit(x, ill)
        ours.append(time.process_time() - start)
        start = time.process_time()
        PLSRegression(8).fit(x, ill)
        theirs.append(time.process_time() - start)
    print(
        f"one fit, median of 9: {np.median(ours):.3f} s, PLSRegression {np.median(theirs):.3f} s", flush=True
    )
    start, wall = time.process_time(), time.perf_counter()
    found = double_validation(
        block_source(blocks),
        ClassOutcome.of(ill),
        candidates=range(1, 9),
        repeats=10,
        permutations=200,
        progress=lambda done, total: print(
            f"{done} of {total}: {time.process_time() - start:.0f} s", flush=True
        ),
    )
    print(
        f"validation: {time.process_time() - start:.0f} s of processor, {time.perf_counter() - wall:.0f} s of clock"
    )
    outcome = ClassOutcome.of(ill)
    drawn = outcome_arrangements(ill, 99, 0)
    search, start = PanelSearch(outcome, SIZES, arrangements=drawn), time.process_time()
    double_validation(block_source(blocks), outcome, candidates=[1], repeats=1, observe=search)
    print(
        f"one repeat of the search for a panel, 99 permutations: {time.process_time() - start:.0f} s of processor"
    )
    print(f"p {found.test.p}, AUC {found.test.observed:.3f}")
    print(f"largest memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6:.2f} GB")


if __name__ == "__main__":
    main()
