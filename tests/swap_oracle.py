"""A yardstick for the search for swapped samples: it knows which features share what, and each row's private scores."""

from itertools import combinations

import numpy as np
from simulated import Study
from swap_studies import prepared_block

from workbench.engine.nuisance import Nuisance
from workbench.engine.swaps.layer_match import LayerMatch, Prediction
from workbench.engine.swaps.swap_bound import clean_bounds
from workbench.engine.swaps.swap_candidates import layer_gains, pair_candidates
from workbench.engine.swaps.swap_layers import SwapLayer, layer_state

NEAR = 5.0


def oracle_finds(
    study: Study, layers: list[SwapLayer], seed: int, level: float = 0.05
) -> frozenset[int] | None:
    """Return the pair that passes its bound by most when modules and private scores are known; None when none does.

    The modules' scores are the sums of their features, signed and weighted by the true loadings, what the design
    and the true private scores add removed (fitted with the true shared scores, every row with its owner's).
    Gains, kinds and bounds are those of the search.
    """
    states = {layer.name: layer_state(layer) for layer in layers}
    scores = {layer.name: _module_scores(study, place, layer) for place, layer in enumerate(layers)}
    matches = {
        frozenset((one.name, other.name)): _match(one, other, scores)
        for one, other in combinations(layers, 2)
    }
    gains = layer_gains(states, matches)
    bounds = clean_bounds(states, matches, level, seed)
    for candidate in pair_candidates(gains, bounds, NEAR)[:1]:
        samples = candidate.samples(states)
        own = clean_bounds(states, matches, level, seed, samples)
        if candidate.gain >= own.of(candidate.kind, 2):
            return samples
    return None


def _module_scores(study: Study, place: int, layer: SwapLayer) -> np.ndarray:
    """Return the scores of the modules in one layer's rows, shape (n_samples, modules)."""
    name, prepared = layer.name, prepared_block(study, place)
    owner = {sample: sample for sample in prepared.samples}
    for cycle in study.truth.swaps[name]:
        owner |= dict(zip(cycle, cycle[1:] + cycle[:1], strict=True))
    owners = [owner[sample] for sample in prepared.samples]
    design = layer.design()[[prepared.samples.index(sample) for sample in owners]]
    private = study.truth.private[name].loc[owners].to_numpy()
    shared = study.truth.shared.loc[owners].to_numpy()
    known = np.hstack([np.ones((len(owners), 1)), design, private, shared])
    coefficients = np.linalg.lstsq(known, prepared.values, rcond=None)[0]
    aside = known.shape[1] - shared.shape[1]
    rest = prepared.values - known[:, :aside] @ coefficients[:aside]
    spread = np.maximum((prepared.values - known @ coefficients).std(axis=0), 1e-12)
    loadings = study.truth.loadings[name][study.positions(name, prepared.features)]
    return (rest / spread) @ loadings


def _match(one: SwapLayer, other: SwapLayer, scores: dict[str, np.ndarray]) -> LayerMatch:
    """Return what two layers tell of each other: every module of the first by the same one of the second."""
    samples, first, second = np.intersect1d(one.samples, other.samples, return_indices=True)
    basis = Nuisance.of(np.hstack([one.design()[first], other.design()[second]]), samples.size).basis
    own, told = (
        part - basis @ (basis.T @ part) for part in (scores[one.name][first], scores[other.name][second])
    )
    lengths = np.linalg.norm(own, axis=0) * np.linalg.norm(told, axis=0)
    r = np.einsum("nk,nk->k", own, told) / lengths
    information = -0.5 * float(np.log1p(-np.minimum(r**2, 1.0 - 1e-12)).sum())
    prediction = Prediction(one.name, other.name, own, told, basis, 0.0, information)
    return LayerMatch(one.name, other.name, (first, second), samples, basis, (prediction,), {}, "")
