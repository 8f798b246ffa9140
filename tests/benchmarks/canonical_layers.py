"""Three layers: calibration of the test, number of axes, account of the variance, and what lacking samples cost.

``null``: p of the first component where nothing is shared, 199 permutations, uniform (Kolmogorov-Smirnov); ``second``:
false second components behind one strong axis; both with all samples and where the third layer lacks a fifth of them.
``axes``: how many axes are found where 0 to 2 are planted, on a fifth lacking. ``account``: mean share of each layer's
variance that is called shared by all, by some, private and noise, beside what was planted. ``lacking``: share of the
planted shared subspace that the components of 1,000 new samples recover, with all samples, with a layer that lacks a
fifth, and with those samples dropped. ``subspace``: the same of three layers beside the best two of them.

Seen: p <= 0.05 where nothing is shared 15 of 400 studies at n = 24, 12 of 400 at 60, 22 of 400 with a fifth lacking;
second component (200 each) 0.060, 0.045, 0.065 (one-sided 0.30, 0.67, 0.20). Axes, 100 studies, above the
truth: 0 axes 0.05, with a fifth lacking 0.05; 1 axis 0.01, 0.03. Account, 100 studies: said less planted
at most 0.023 in the mean of any layer and part (spread 0.02 to 0.05). Lacking, 40 studies, gain over dropping the
samples at n = 40 with strong and n = 60 with weak factors: ridge 0.01 -0.0015 +- 0.0005 and +0.0010 +- 0.0006, 0.1
+0.0005 and +0.0031, 1 +0.0022 and +0.0084, 10 +0.0075 and +0.053, chosen +0.0013 +- 0.0003 and +0.0060 +- 0.0008.

Run: python tests/benchmarks/canonical_layers.py null|second|axes|account|lacking|subspace [--studies 100] [--first 0]
"""

from __future__ import annotations

import argparse
import itertools

import numpy as np
from numpy.typing import NDArray
from scipy.stats import binomtest, kstest

from workbench.engine.canonical.generalised_account import takes_part, variance_accounts
from workbench.engine.canonical.generalised_cca import GeneralisedCCA
from workbench.engine.canonical.generalised_permutation import generalised_pair_test
from workbench.engine.canonical.generalised_validation import blocks_source, cross_validated_components

FloatArray = NDArray[np.float64]
Loadings = list[tuple[FloatArray, FloatArray]]

WIDTHS = (300, 150, 80)
LEVEL = 0.05


def draw_loadings(rng: np.random.Generator, shared: int, strength: float) -> Loadings:
    """Return loadings of shared and of two private factors on every feature of each layer."""
    return [
        (strength * rng.normal(size=(shared, width)), 0.7 * rng.normal(size=(2, width))) for width in WIDTHS
    ]


def draw_layers(rng: np.random.Generator, loadings: Loadings, shared: FloatArray) -> list[FloatArray]:
    """Return the layers of samples with these shared factors."""
    n = len(shared)
    return [
        rng.normal(size=(n, joint.shape[1])) + shared @ joint + rng.normal(size=(n, len(own))) @ own
        for joint, own in loadings
    ]


def with_lacking(layers: list[FloatArray], share: float) -> list[FloatArray]:
    """Return the layers, the last without the first samples."""
    last = layers[-1].copy()
    last[: int(share * len(last))] = np.nan
    return [*layers[:-1], last]


def recovered(scores: FloatArray, truth: FloatArray) -> float:
    """Return the share of the true factors' variance that scores explain."""
    basis = np.linalg.qr(scores - scores.mean(axis=0))[0]
    centred = truth - truth.mean(axis=0)
    return 1.0 - float(np.sum((centred - basis @ (basis.T @ centred)) ** 2) / np.sum(centred**2))


def calibration(seeds: range, shared: int) -> None:
    """Print how often the component behind the shared ones is found."""
    for n, lacking in ((24, 0.0), (60, 0.0), (40, 0.2)):
        p = []
        for seed in seeds:
            rng = np.random.default_rng([seed, n, shared, 11])
            layers = draw_layers(rng, draw_loadings(rng, shared, 1.0), rng.normal(size=(n, shared)))
            test = generalised_pair_test(
                with_lacking(layers, lacking), permutations=199, components=shared + 1, stop_above=None,
                random_state=seed, early_stop=False,
            )  # fmt: skip
            p.append(test.p_by_pair[shared] if len(test.p_by_pair) > shared else 1.0)
        found = int(np.sum(np.array(p) <= LEVEL))
        above = binomtest(found, len(p), LEVEL, alternative="greater").pvalue
        fit = "" if shared else f", uniform {kstest(p, 'uniform').pvalue:.3f}"
        print(
            f"component {shared + 1}, n {n}, {lacking:.0%} lacking: p <= 0.05 in {found} of {len(p)}, above the level "
            f"{above:.3f}{fit}",
            flush=True,
        )


def axes(seeds: range) -> None:
    """Print the number of axes found."""
    for shared, lacking in itertools.product((0, 1, 2), (0.0, 0.2)):
        found = []
        for seed in seeds:
            rng = np.random.default_rng([seed, shared, 12])
            layers = draw_layers(rng, draw_loadings(rng, shared, 0.7), rng.normal(size=(60, shared)))
            told = with_lacking(layers, lacking)
            found.append(
                generalised_pair_test(told, permutations=199, components=5, random_state=seed).axes()
            )
        numbers = np.array(found)
        print(
            f"{shared} axes, {lacking:.0%} lacking: right {np.mean(numbers == shared):.3f}, above "
            f"{np.mean(numbers > shared):.3f}, found {np.bincount(numbers, minlength=6).tolist()}",
            flush=True,
        )


def account(seeds: range) -> None:
    """Print mean shares said and planted: a factor of all layers, one of the first two, one of each its own."""
    errors = []
    for seed in seeds:
        rng = np.random.default_rng([seed, 13])
        factors = rng.normal(size=(100, 5))
        carried = ((0, 1, 2), (0, 1, 3), (0, 4))
        said, planted, layers = [], [], []
        for width, columns in zip(WIDTHS, carried, strict=True):
            loadings = 0.7 * rng.normal(size=(len(columns), width))
            layers.append(factors[:, columns] @ loadings + rng.normal(size=(100, width)))
            parts = dict(zip(columns, loadings**2, strict=True))
            nothing = np.zeros(width)
            kinds = [parts[0], parts.get(1, nothing), parts[columns[-1]], np.ones(width)]
            planted.append([float(np.mean(kind / np.sum(kinds, axis=0))) for kind in kinds])
        valid = cross_validated_components(blocks_source(layers), 100, n_components=2, repeats=1, seed=seed)
        multiple = 1.0 if valid.choice is None else valid.choice.multiple
        fit = GeneralisedCCA(2, ridge=multiple, block_sizes=WIDTHS).fit(np.hstack(layers))
        part = takes_part(valid.with_others, valid.with_others_errors, fit.variates_)
        whole = [(layer - layer.mean(axis=0)) / layer.std(axis=0, ddof=1) for layer in layers]
        for one in variance_accounts(whole, fit.variates_, part):
            said.append([one.shared_by_all, one.shared_by_some, one.private, one.noise])
        errors.append(np.array(said) - np.array(planted))
    every = np.array(errors)
    print(f"{len(every)} studies, said less planted (layers x shared by all, by some, private, noise):")
    print(np.round(every.mean(axis=0), 3), "spread", np.round(every.std(axis=0), 3), sep="\n", flush=True)


def lacking(seeds: range) -> None:
    """Print what a layer that lacks a fifth of the samples costs beside dropping them."""
    for (n, strength), ridge in itertools.product(((40, 0.5), (60, 0.3)), (0.01, 0.1, 1.0, 10.0, "auto")):
        shares = []
        for seed in seeds:
            rng = np.random.default_rng([seed, 5])
            loadings = draw_loadings(rng, 2, strength)
            layers = draw_layers(rng, loadings, rng.normal(size=(n, 2)))
            truth = rng.normal(size=(1000, 2))
            new = np.hstack(draw_layers(rng, loadings, truth))
            every = np.hstack(layers)
            kinds = (every, np.hstack(with_lacking(layers, 0.2)), every[int(0.2 * n) :])
            model = GeneralisedCCA(2, ridge=ridge, block_sizes=WIDTHS, random_state=0)
            shares.append([recovered(model.fit(kind).transform(new), truth) for kind in kinds])
        table = np.array(shares)
        gain = table[:, 1] - table[:, 2]
        error = gain.std(ddof=1) / np.sqrt(len(gain))
        means = ", ".join(
            f"{name} {value:.3f}"
            for name, value in zip(("all", "lacking", "dropped"), table.mean(axis=0), strict=True)
        )
        print(
            f"n {n}, strength {strength}, ridge {ridge}: {means}, gain {gain.mean():+.4f} +- {error:.4f}",
            flush=True,
        )


def subspace(seeds: range) -> None:
    """Print the share of the shared subspace that three layers recover beside every two of them."""
    shares = []
    for seed in seeds:
        rng = np.random.default_rng([seed, 15])
        loadings = draw_loadings(rng, 2, 0.4)
        layers = draw_layers(rng, loadings, rng.normal(size=(60, 2)))
        truth = rng.normal(size=(1000, 2))
        new = draw_layers(rng, loadings, truth)
        row = []
        for chosen in ((0, 1, 2), (0, 1), (0, 2), (1, 2)):
            sizes = [WIDTHS[k] for k in chosen]
            model = GeneralisedCCA(2, block_sizes=sizes, random_state=0).fit(
                np.hstack([layers[k] for k in chosen])
            )
            row.append(recovered(model.transform(np.hstack([new[k] for k in chosen])), truth))
        shares.append(row)
    print(f"{len(shares)} studies, three layers and each two: {np.mean(shares, axis=0).round(3)}", flush=True)


def main() -> None:
    """Run one part."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parts = {
        "null": lambda seeds: calibration(seeds, 0),
        "second": lambda seeds: calibration(seeds, 1),
        "axes": axes,
        "account": account,
        "lacking": lacking,
        "subspace": subspace,
    }
    parser.add_argument("part", choices=list(parts))
    parser.add_argument("--studies", type=int, default=100)
    parser.add_argument("--first", type=int, default=0, help="seed of the first study")
    chosen = parser.parse_args()
    parts[chosen.part](range(chosen.first, chosen.first + chosen.studies))


if __name__ == "__main__":
    main()
