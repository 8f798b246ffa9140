"""What the double cross-validation says against what the same model gets on 2,000 new samples; run by hand.

Four ways for a class to be carried (100 samples, 400 + 150 features): by one block, by two together, by none alone
but by their combination (the second block measures what hides it in the first), and by two with three blocks of noise
beside. ``python tests/benchmarks/supervised_power.py STUDIES [KIND]...``.

Measured (1 repeat, seeds from 0; said, reached on 2,000 new samples): one 0.891, 0.883; two 0.750, 0.768; combination
0.780, 0.806 (8 studies each; best single block 0.647); two beside three blocks of noise 0.740, 0.767 (6 studies).
Without the choice of blocks the last was 0.61, and one block beside the other 0.757 instead of 0.898.
"""

from __future__ import annotations

import sys

import numpy as np
from numpy.typing import NDArray

from workbench.engine import ClassOutcome, MultiblockDiscriminant, block_source, double_validation

FloatArray = NDArray[np.float64]
NEW = 2000


def study(kind: str, n: int, rng: np.random.Generator) -> tuple[NDArray[np.intp], list[FloatArray]]:
    """Return classes and blocks of ``n`` samples; the loadings are the same for one state of the generator."""
    ill = rng.permutation(np.arange(n) % 2)
    signal = (2.0 * ill - 1.0)[:, None]
    hidden = rng.normal(size=(n, 1))
    first, second = rng.normal(size=(n, 400)), rng.normal(size=(n, 150))
    if kind == "one":
        first[:, :30] += 0.35 * signal
    elif kind in ("two", "noise"):
        first[:, :30] += 0.25 * signal
        second[:, :12] += 0.25 * signal
    elif kind == "combination":
        first[:, :60] += 0.5 * signal + 1.5 * hidden
        second[:, :40] += 1.5 * hidden
    blocks = [first, second]
    if kind == "noise":
        blocks += [rng.normal(size=(n, size)) for size in (300, 100, 20)]
    return ill, blocks


def main(studies: int, kinds: list[str]) -> None:
    """Measure and print."""
    for kind in kinds or ["one", "two", "combination", "noise"]:
        rows = []
        for seed in range(studies):
            rng = np.random.default_rng(seed)
            ill, blocks = study(kind, 100, rng)
            found = double_validation(
                block_source(blocks),
                ClassOutcome.of(ill),
                candidates=range(1, 7),
                repeats=1,
                seed=seed,
            )
            said = found.model.performance.balanced_accuracy.mean()
            used = [blocks[b] for b in found.blocks]
            model = MultiblockDiscriminant(found.components, block_sizes=[b.shape[1] for b in used])
            model.fit(np.hstack(used), ill)
            truth, new = study(kind, NEW, rng)
            hit = model.predict(np.hstack([new[b] for b in found.blocks])) == truth
            real = np.mean([hit[truth == g].mean() for g in (0, 1)])
            singles = [one.performance.balanced_accuracy.mean() for one in found.singles]
            rows.append((said, real, max(singles), found.components, len(found.blocks)))
        said, real, single, components, count = np.array(rows, dtype=float).T
        print(
            f"{kind}: said {said.mean():.3f} (sd {said.std():.3f}), on {NEW} new samples {real.mean():.3f}, difference "
            f"{(said - real).mean():+.3f}; best single {single.mean():.3f}; components {components.mean():.1f}, blocks "
            f"{count.mean():.1f}",
            flush=True,
        )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 10, sys.argv[2:])
