"""How many axes are found, and whether their strength in new samples is what is said.

``axes``: 0 to 3 shared factors on all features under two private ones a side, beside an oracle that knows the loadings.
``validation``: cross-validated correlations beside what the folds' own models (four fifths of the samples) reach in
2,000 new samples. ``noise``: cross-validated correlations where nothing is shared.

Seen, 199 permutations, 200 studies each, right number of axes (above the truth): 400 x 150 features, 0 axes 0.97
(0.03), 1: 0.94 (0.06), 2: 0.98 (0.01), 3: 0.98 (0.02); 20 x 10 features 0.96 (0.04), 0.96 (0.04), 0.95 (0.04), 0.96
(0.04); the oracle sees all in every study. Validation, 240 studies: said 0.706; the folds' models together reach
0.730 in new samples (said less that -0.024 +- 0.007), each on its own 0.688 on average (+0.018 +- 0.006): folds whose
direction is good have larger scores and weigh more. Noise, 200 studies of 40 samples, the ridge chosen: +0.007 +-
0.014.

Run: python tests/benchmarks/canonical_axes.py axes|validation|noise [--studies 50]
"""

from __future__ import annotations

import argparse
import time

import numpy as np
from numpy.typing import NDArray

from workbench.engine import RegularisedCCA, array_source, canonical_pair_test, cross_validated_correlations
from workbench.engine.subject_folds import make_folds

FloatArray = NDArray[np.float64]


def draw_sides(
    rng: np.random.Generator,
    rows: int,
    loadings: tuple[tuple[FloatArray, FloatArray], ...],
    shared: FloatArray,
) -> list[FloatArray]:
    """Return both sides of some samples: shared factors, private ones, unit noise."""
    return [
        rng.normal(size=(rows, joint.shape[1])) + shared @ joint + rng.normal(size=(rows, len(own))) @ own
        for joint, own in loadings
    ]


def draw_loadings(
    rng: np.random.Generator, widths: tuple[int, int], shared: int, strength: float, private: int = 2
) -> tuple[tuple[FloatArray, FloatArray], ...]:
    """Return loadings of shared and private factors on every feature."""
    return tuple(
        (strength * rng.normal(size=(shared, width)), 0.7 * rng.normal(size=(private, width)))
        for width in widths
    )


def axes(seeds: range) -> None:
    """Print the number of axes found where 0 to 3 are planted, and how often an oracle sees all of them.

    The oracle knows the loadings: it scores each factor by least squares on each side and tests the correlation of the
    two scores, factor by factor (Fisher z, 0.05).
    """
    for n, widths in ((60, (400, 150)), (60, (20, 10))):
        for shared in (0, 1, 2, 3):
            found, oracle, start = [], [], time.perf_counter()
            for seed in seeds:
                rng = np.random.default_rng([seed, n, widths[0], shared])
                loadings = draw_loadings(rng, widths, shared, 0.7 if widths[0] > n else 1.5)
                factors = rng.normal(size=(n, shared))
                x, y = draw_sides(rng, n, loadings, factors)
                test = canonical_pair_test(x, y, permutations=199, pairs=5, random_state=seed)
                found.append(test.axes())
                oracle.append(_oracle(x, y, loadings))
            numbers = np.bincount(found, minlength=6)
            right, above = np.mean(np.array(found) == shared), np.mean(np.array(found) > shared)
            print(
                f"n {n}, {widths[0]} x {widths[1]}, {shared} axes: right {right:.2f}, above {above:.2f}, found "
                f"{numbers.tolist()}; the oracle sees all in {np.mean(oracle):.2f} "
                f"({time.perf_counter() - start:.0f} s)",
                flush=True,
            )


def _oracle(x: FloatArray, y: FloatArray, loadings: tuple[tuple[FloatArray, FloatArray], ...]) -> bool:
    scores = []
    for side, (joint, own) in zip((x, y), loadings, strict=True):
        every = np.vstack([joint, own])
        solved = np.linalg.lstsq(every.T, side.T, rcond=None)[0].T
        scores.append(solved[:, : len(joint)])
    z = [
        np.arctanh(np.corrcoef(u, v)[0, 1]) * np.sqrt(len(x) - 3)
        for u, v in zip(scores[0].T, scores[1].T, strict=True)
    ]
    return all(one > 1.96 for one in z)


def validation(seeds: range) -> None:
    """Print how far the cross-validated correlation of the first pair is from what such models reach in new samples.

    The models are those of the folds themselves. ``reached`` puts the new samples of all folds together as the
    cross-validation does its test samples; ``mean`` is the mean of the folds' own correlations.
    """
    rows = []
    for done, seed in enumerate(seeds, start=1):
        rng = np.random.default_rng([seed, 3])
        loadings = draw_loadings(rng, (300, 100), 1, 0.3)
        x, y = draw_sides(rng, 50, loadings, rng.normal(size=(50, 1)))
        new = draw_sides(rng, 2000, loadings, rng.normal(size=(2000, 1)))
        said = cross_validated_correlations(array_source(x, y), 50, n_components=1, repeats=1, seed=seed)
        folds = make_folds(None, None, 50, 5, np.random.SeedSequence(seed, spawn_key=(0,)))
        products = []
        for (train, _), ridge in zip(folds, said.ridges[0], strict=True):
            u, v = RegularisedCCA(1, ridge=tuple(ridge)).fit(x[train], y[train]).transform(*new)
            products.append([float(np.sum(a * b)) for a, b in ((u, v), (u, u), (v, v))])
        uv, uu, vv = np.array(products).T
        reached, mean = uv.sum() / np.sqrt(uu.sum() * vv.sum()), np.mean(uv / np.sqrt(uu * vv))
        rows.append((said.correlations[0], reached, mean))
        if done % 20 == 0:
            _report(np.array(rows), done)


def _report(rows: FloatArray, done: int) -> None:
    said, reached, mean = rows.T
    gaps = ", ".join(
        f"{np.mean(said - other):+.3f} +- {np.std(said - other, ddof=1) / np.sqrt(done):.3f}"
        for other in (reached, mean)
    )
    print(
        f"{done} studies: said {said.mean():.3f}, reached {reached.mean():.3f}, mean {mean.mean():.3f}, said less each "
        f"{gaps}",
        flush=True,
    )


def noise(seeds: range) -> None:
    """Print the mean cross-validated correlation where nothing is shared."""
    said: list[float] = []
    for done, seed in enumerate(seeds, start=1):
        rng = np.random.default_rng([seed, 4])
        x, y = draw_sides(rng, 40, draw_loadings(rng, (300, 100), 0, 0.0), np.empty((40, 0)))
        found = cross_validated_correlations(array_source(x, y), 40, n_components=1, repeats=1, seed=seed)
        said.append(float(found.correlations[0]))
        if done % 20 == 0:
            error = np.std(said, ddof=1) / np.sqrt(done)
            print(f"{done} studies of noise: mean {np.mean(said):+.3f} +- {error:.3f}", flush=True)


def main() -> None:
    """Run one part."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("part", choices=["axes", "validation", "noise"])
    parser.add_argument("--studies", type=int, default=50)
    parser.add_argument("--first", type=int, default=0, help="seed of the first study")
    chosen = parser.parse_args()
    seeds = range(chosen.first, chosen.first + chosen.studies)
    {"axes": axes, "validation": validation, "noise": noise}[chosen.part](seeds)


if __name__ == "__main__":
    main()
