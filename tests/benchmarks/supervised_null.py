"""Nothing leaks: studies of pure noise, everything that can be learnt inside; run by hand.

Each study: two blocks (200 + 60 features) with 5 % gaps and one strong private factor each, two classes at random. In
every training part gaps are filled (nearest neighbours of the training samples), private variation is removed, the
panel is chosen; 99 permutations. ``python tests/benchmarks/supervised_null.py N STUDIES KIND`` with KIND plain (no
gaps, no removal), full, or subjects (three samples of each subject, class by subject; N of 36 at least, since fewer
than 120 arrangements of subjects have no p).

Measured on two blocks of noise without gaps and removal, 200 studies of 24, one repeat: balanced accuracy 0.504,
p <= 0.05 in 0.040, uniform by Kolmogorov-Smirnov p = 0.68. Full, 12 studies of 24: balanced accuracy 0.510, of panels
0.580, p <= 0.05 in 0.083: too few studies to say more.
"""

from __future__ import annotations

import sys
import time

import numpy as np
from numpy.typing import NDArray
from scipy.stats import kstest
from sklearn.impute import KNNImputer

from workbench.engine import ClassOutcome, PanelSearch, SubjectDesign, block_source, double_validation
from workbench.engine.private_removal import PrivateRemoval

FloatArray = NDArray[np.float64]
Blocks = tuple[FloatArray, ...]


def prepare(train: Blocks, test: Blocks) -> tuple[Blocks, Blocks]:
    """Fill gaps and remove private variation, learnt from the training rows."""
    filled = [KNNImputer(n_neighbors=5, keep_empty_features=True).fit(x) for x in train]
    x, z = ([one.transform(part) for one, part in zip(filled, rows, strict=True)] for rows in (train, test))
    removals = [PrivateRemoval.fit(x[b], [x[1 - b]]) for b in (0, 1)]
    return (
        tuple(removal.transform(part) for removal, part in zip(removals, x, strict=True)),
        tuple(removal.transform(part) for removal, part in zip(removals, z, strict=True)),
    )


def study(
    n: int, kind: str, rng: np.random.Generator
) -> tuple[NDArray[np.intp], list[FloatArray], SubjectDesign | None]:
    """Return classes, blocks and subjects of one study."""
    subject = np.arange(n) if kind != "subjects" else np.arange(n) // 3
    count = subject[-1] + 1
    labels = rng.permutation(np.arange(count) % 2)[subject]
    blocks = []
    for p in (200, 60):
        own = rng.normal(size=(count, 1))[subject] @ rng.normal(size=(1, p))
        persons = rng.normal(size=(count, p))[subject] if kind == "subjects" else 0.0
        x = rng.normal(size=(n, p)) + own + persons
        if kind != "plain":
            x[rng.random(x.shape) < 0.05] = np.nan
        blocks.append(x)
    return labels, blocks, SubjectDesign.of(subject) if kind == "subjects" else None


def main(n: int, studies: int, kind: str) -> None:
    """Measure and print."""
    accuracy, panels, p, start = [], [], [], time.process_time()
    for seed in range(studies):
        labels, blocks, subjects = study(n, kind, np.random.default_rng(7000 + seed))
        outcome = ClassOutcome.of(labels)
        search = PanelSearch(outcome, [200, 60], components=(1, 2), largest=40)
        source = block_source(blocks, prepare=None if kind == "plain" else prepare)
        found = double_validation(
            source,
            outcome,
            subjects=subjects,
            repeats=1,
            permutations=99,
            seed=seed,
            candidates=(1, 2, 3, 4),
            observe=search,
        )
        every = np.arange(n)
        accuracy.append(found.model.performance.balanced_accuracy.mean())
        panels.append(search.panel(source(every, every)).performance.balanced_accuracy.mean())
        p.append(found.test.p)
        if seed % 4 == 3 or seed == studies - 1:
            values = np.array([one for one in p if one is not None])
            uniform = kstest(values - 0.005, "uniform").pvalue if values.size else np.nan
            small = (values <= 0.05).mean() if values.size else np.nan
            print(
                f"{kind} n={n}, {seed + 1} studies, {time.process_time() - start:.0f} s: balanced accuracy "
                f"{np.mean(accuracy):.4f}, of panels {np.mean(panels):.4f}; p <= 0.05 in {small:.3f} of {values.size}, "
                f"uniform by Kolmogorov-Smirnov p = {uniform:.2f}",
                flush=True,
            )


if __name__ == "__main__":
    main(int(sys.argv[1]), int(sys.argv[2]), sys.argv[3])
