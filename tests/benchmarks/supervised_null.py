"""Nothing leaks: studies of pure noise, everything that can be learnt inside; run by hand.

Each study has two blocks (120 + 50 features) with one strong private factor each and an outcome that has nothing to
do with them; one repeat, 99 permutations. ``python tests/benchmarks/supervised_null.py KIND N [STUDIES [FIRST]]``
with KIND

- ``classes``: two classes at random; ``number``: a normal outcome;
- ``panel``: two classes, 5 % gaps; gaps are filled (nearest neighbours of the training samples) and a panel is chosen
  in every training part, its p from 99 permutations too;
- ``subjects``: three samples of each subject with features of its own, the class is the subject's;
- ``visits``: two samples of each subject, the class is the visit, changes within subjects;
- ``nuisance``: two classes, 80 % of a class in one of two batches and an age 1.2 standard deviations apart, both
  regressed out of the blocks, which depend on them; classes exchanged within batches.

``python tests/benchmarks/supervised_null.py summary FILE...`` puts together what pieces printed.

Measured (Python 3.11, numpy 2.4; figure with standard error, p of 0.05 or less, p of uniformity by Kolmogorov-Smirnov):

=========  ===  =======  =================================  ======  =====
kind         n  studies  figure                             <=0.05  K.-S.
=========  ===  =======  =================================  ======  =====
classes     24      200  balanced accuracy 0.489 +- 0.009    0.030   0.45
classes     60      200  0.500 +- 0.006                      0.025   0.45
number      24      200  Q2 -0.26 +- 0.02                    0.070   0.20
number      60      100  Q2 -0.23 +- 0.02                    0.030   0.91
panel       24      100  model 0.498 +- 0.013                0.040   0.98
panel       24      100  panel 0.511 +- 0.013                0.060   0.21
panel       60      100  model 0.501 +- 0.008                0.020   0.60
panel       60      100  panel 0.489 +- 0.007                0.010   0.13
subjects    36      500  0.500 +- 0.006                      0.070   0.04
subjects    60      100  0.486 +- 0.009                      0.040   0.44
visits      24      200  0.494 +- 0.012                      0.030   0.96
visits      60      100  0.493 +- 0.012                      0.070   0.13
nuisance    24      181  0.514 +- 0.007                      0.055   0.10
nuisance    60      100  0.506 +- 0.008                      0.070   0.77
=========  ===  =======  =================================  ======  =====

Over all p of models 0.049 of 2,081 are 0.05 or less, no condition too many by Holm; twelve subjects (n = 36) are the
nearest to it: folds are balanced for the classes as delivered and not for every arrangement. Exchanged freely and not
within batches, studies much like those of ``nuisance`` had 0.010 of 200 (n = 24) and 0.030 of 200 (n = 60), with a
batch alone 0.030 and 0.025: valid and weaker.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.stats import kstest
from sklearn.impute import KNNImputer

from workbench.engine import (
    ClassOutcome,
    NumberOutcome,
    PanelSearch,
    SubjectDesign,
    block_source,
    centred,
    double_validation,
)
from workbench.engine.supervised.double_arrangements import outcome_arrangements

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
Blocks = tuple[FloatArray, ...]

SIZES = (120, 50)
PERMUTATIONS = 99
SAMPLES_OF_A_SUBJECT = {"subjects": 3, "visits": 2}


def filled(train: Blocks, test: Blocks) -> tuple[Blocks, Blocks]:
    """Fill gaps by what the training rows teach."""
    learnt = [KNNImputer(n_neighbors=5, keep_empty_features=True).fit(x) for x in train]
    x, z = (
        tuple(one.transform(part) for one, part in zip(learnt, rows, strict=True)) for rows in (train, test)
    )
    return x, z


def noise(n: int, subject: IndexArray, nuisance: FloatArray, rng: np.random.Generator) -> list[FloatArray]:
    """Blocks of noise: a private factor, the subject's own level, and what the nuisance does to each feature."""
    count, blocks = subject[-1] + 1, []
    for p in SIZES:
        own = rng.normal(size=(n, 1)) @ rng.normal(size=(1, p))
        person = rng.normal(size=(count, p))[subject] if count < n else 0.0
        shifted = nuisance @ rng.normal(size=(nuisance.shape[1], p))
        blocks.append(rng.normal(size=(n, p)) + own + person + shifted)
    return blocks


def tangled(labels: IndexArray, rng: np.random.Generator) -> FloatArray:
    """Return a batch and an age that go with the classes."""
    batch = np.where(rng.random(labels.size) < 0.8, labels, 1 - labels)
    return np.column_stack([batch, 1.2 * labels + rng.normal(size=labels.size)]).astype(np.float64)


def study(kind: str, n: int, seed: int) -> tuple[float, float, float, float]:
    """Balanced accuracy (Q2 of a number), p, and the same of the panel (NaN without one)."""
    rng = np.random.default_rng(7000 + seed)
    subject = np.arange(n) // SAMPLES_OF_A_SUBJECT.get(kind, 1)
    count = subject[-1] + 1
    labels = np.arange(n) % 2 if kind == "visits" else rng.permutation(np.arange(count) % 2)[subject]
    nuisance = tangled(labels, rng) if kind == "nuisance" else np.empty((n, 0))
    outcome = NumberOutcome.of(rng.normal(size=n)) if kind == "number" else ClassOutcome.of(labels)
    blocks = noise(n, subject, nuisance, rng)
    design = SubjectDesign.of(subject, np.arange(n) if kind == "visits" else None) if count < n else None
    if kind == "visits" and design is not None:
        blocks = [centred(design, x) for x in blocks]
    if kind == "panel":
        blocks = [np.where(rng.random(x.shape) < 0.05, np.nan, x) for x in blocks]
    source = block_source(blocks, nuisance if nuisance.size else None, filled if kind == "panel" else None)
    drawn = outcome_arrangements(outcome.delivered, PERMUTATIONS, seed, subjects=design)
    search = PanelSearch(outcome, SIZES, components=(1, 2), largest=20, arrangements=drawn)
    found = double_validation(
        source,
        outcome,
        nuisance=nuisance,
        subjects=design,
        strata=nuisance[:, :1] if nuisance.size else None,
        exchange=nuisance[:, 0] if nuisance.size else None,
        repeats=1,
        permutations=PERMUTATIONS,
        seed=seed,
        candidates=(1, 2, 3, 4),
        observe=search if kind == "panel" else None,
    )
    told = figure(found.model.performance), chance(found.test.p)
    if kind != "panel":
        return *told, np.nan, np.nan
    every = np.arange(n)
    panel = search.panel(source(every, every))
    return *told, figure(panel.performance), chance(panel.test.p if panel.test is not None else None)


def figure(performance: object) -> float:
    """Balanced accuracy, or Q2."""
    values = getattr(performance, "balanced_accuracy", None)
    return float(np.mean(performance.q2 if values is None else values))  # type: ignore[attr-defined]


def chance(p: float | None) -> float:
    """NaN where p was withheld."""
    return np.nan if p is None else p


def summary(rows: NDArray[np.float64]) -> str:
    """Means with standard errors; how p is spread."""
    words = []
    for name, figures, p in (("model", rows[:, 0], rows[:, 1]), ("panel", rows[:, 2], rows[:, 3])):
        if np.isnan(figures).all():
            continue
        held = p[np.isfinite(p)]
        spread = (
            "no p"
            if not held.size
            else (
                f"p <= 0.05 in {(held <= 0.05).mean():.3f}, <= 0.1 in {(held <= 0.1).mean():.3f} of {held.size}, "
                f"Kolmogorov-Smirnov p = {kstest(held - 0.5 / (PERMUTATIONS + 1), 'uniform').pvalue:.2f}"
            )
        )
        error = figures.std(ddof=1) / np.sqrt(figures.size)
        words.append(f"{name} {figures.mean():.4f} +- {error:.4f}; {spread}")
    return f"{len(rows)} studies: " + "; ".join(words)


def main(words: list[str]) -> None:
    """Measure and print, or put pieces together."""
    if words[0] == "summary":
        lines = [line.split("\t") for path in words[1:] for line in Path(path).read_text().splitlines()]
        print(summary(np.array([[float(x) for x in line[3:7]] for line in lines if len(line) == 7])))
        return
    kind, n = words[0], int(words[1])
    studies, first = (int(words[k]) if len(words) > k else default for k, default in ((2, 200), (3, 0)))
    rows = []
    for seed in range(first, first + studies):
        rows.append(study(kind, n, seed))
        print(kind, n, seed, *rows[-1], sep="\t", flush=True)
    print(summary(np.array(rows)))


if __name__ == "__main__":
    main(sys.argv[1:])
