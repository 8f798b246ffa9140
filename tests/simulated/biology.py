"""The log-scale signal of a block: shared modules, private factors, groups, run days, time and noise."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pandas as pd

from .design import Block, Design
from .sheet import day_column, indicators, stream

ODD_SIZE = 3.0
"""Standard deviation of the random profile that an odd sample adds to its row."""

COPY_NOISE = 0.1
"""Standard deviation of the difference between a near copy and its original, in noise standard deviations."""

LOADING_SPREAD = 0.25
"""Largest relative departure of a module feature's loading from the strength."""

LOG_NORMAL_SHARE = 0.8
"""Share of the noise variance of counts that is log-normal when it has to run along subjects or have tails."""


@dataclass(frozen=True)
class Signal:
    """The signal of one block, features in noise standard deviations, and what it was made of.

    `latent` (n, p); `loadings` (p, modules); `private` (n, factors); `group_effects` (p, groups - 1);
    `copies` (duplicates, 2): columns of the copy and of its original; `odd`: rows that went wrong.
    """

    latent: np.ndarray
    loadings: np.ndarray
    private: np.ndarray
    group_effects: np.ndarray
    copies: np.ndarray
    odd: np.ndarray


def row_mixing(design: Design) -> np.ndarray:
    """Return the matrix C, shape (n, n), whose CC' is the correlation of a subject's samples.

    Two visits t apart have the correlation s + (1 - s) rho^t with s the subject's share; one visit: the identity.
    """
    lag = np.abs(np.subtract.outer(np.arange(design.visits), np.arange(design.visits)))
    rest = np.where(lag == 0, 1.0, design.autocorrelation**lag)
    within = design.subject_share + (1 - design.subject_share) * rest
    return np.kron(np.eye(design.n // design.visits), np.linalg.cholesky(within))


def shared_scores(design: Design, seed: int) -> np.ndarray:
    """Return the scores of the shared modules, shape (n, modules), each of mean 0 and variance 1 in these samples.

    The strength of a module is thereby that of the study at hand, not that of a population it was drawn from.
    """
    scores = row_mixing(design) @ stream(seed, 0, 1).standard_normal((design.n, design.modules))
    return np.asarray((scores - scores.mean(axis=0)) / scores.std(axis=0))


def block_signal(design: Design, place: int, sheet: pd.DataFrame, shared: np.ndarray, seed: int) -> Signal:
    """Return the signal of the block at `place`, every part drawn from a stream of its own."""
    block, parts = design.blocks[place], iter(range(1, 20))
    mixing, n, p = row_mixing(design), design.n, block.features

    def rng() -> np.random.Generator:
        return stream(seed, place + 1, next(parts))

    copies, loadings = _features(block, design, rng())
    private, private_part = _private(block, n, mixing, rng())
    effects, group_part = _group(block, design.groups, sheet, rng())
    latent = shared @ loadings.T + private_part + group_part
    latent += _days(block, sheet, design.day_effect, rng())
    latent += _time(block, sheet, design.trend, rng())
    latent += mixing @ _noise(block, design, rng())
    odd = _odd_rows(block, design, seed, rng())
    latent[odd] += ODD_SIZE * rng().standard_normal((len(odd), p))
    if block.clusters:
        latent += mixing @ _clusters(block, n, rng())
    if block.nested:
        latent += mixing @ _nested(block, loadings, n, rng())
    return Signal(latent, loadings, private, effects, copies, odd)


def _features(block: Block, design: Design, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """Return near copies and loadings: magnitudes spread evenly around the strength, signs at random.

    A copy has the loadings of its original.
    """
    order = rng.permutation(block.features)
    inside = design.modules * block.module_size
    loadings = np.zeros((block.features, design.modules))
    members = order[:inside]
    spread = rng.uniform(1 - LOADING_SPREAD, 1 + LOADING_SPREAD, inside)
    size = design.strength * spread * rng.choice([-1.0, 1.0], inside)
    loadings[members, np.arange(inside) % max(1, design.modules)] = size
    for module in range(design.modules if block.overlap else 0):
        both = members[module :: design.modules][: block.overlap]
        loadings[both, (module + 1) % design.modules] = design.strength * rng.choice([-1.0, 1.0], both.size)
    cut = block.features - block.duplicates
    originals = rng.choice(order[:cut], block.duplicates, replace=block.duplicates > cut)
    copies = np.column_stack([order[cut:], originals])
    loadings[copies[:, 0]] = loadings[copies[:, 1]]
    return copies, loadings


def _private(
    block: Block, n: int, mixing: np.ndarray, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Return the private scores and what they add; each factor has 0.8 of the variance of the one before."""
    k = block.private_factors
    scores = mixing @ rng.standard_normal((n, k))
    share = 0.8 ** np.arange(k)
    weights = block.private_strength * np.sqrt(share / max(share.sum(), 1.0))
    return scores, scores @ (rng.standard_normal((block.features, k)) * weights).T


def _clusters(block: Block, n: int, rng: np.random.Generator) -> np.ndarray:
    """Return what the factors of small groups of features add."""
    group = rng.permutation(block.features) // block.clusters
    factors = rng.standard_normal((n, int(group.max()) + 1))
    return factors[:, group] * block.cluster_strength * rng.choice([-1.0, 1.0], block.features)


def _nested(block: Block, loadings: np.ndarray, n: int, rng: np.random.Generator) -> np.ndarray:
    """Return what a factor of its own adds to the features of each module."""
    factors = rng.standard_normal((n, loadings.shape[1]))
    return factors @ (block.nested * (loadings != 0) * rng.choice([-1.0, 1.0], loadings.shape)).T


def _group(
    block: Block, groups: tuple[str, ...], sheet: pd.DataFrame, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Return the effects of the groups against the first, shape (p, groups - 1), and what they add."""
    others = groups[1:]
    hit = rng.random((block.features, 1)) < block.group_share
    effects = block.group_effect * hit * rng.choice([-1.0, 1.0], (block.features, len(others)))
    if not others:
        return effects, np.zeros((len(sheet), block.features))
    members = sheet["group"].to_numpy()[:, np.newaxis] == np.array(others)
    return effects, members @ effects.T


def _days(block: Block, sheet: pd.DataFrame, effect: float, rng: np.random.Generator) -> np.ndarray:
    """Return shifts of the run days and the drift over the run order."""
    column = day_column(sheet, block.name)
    added = np.zeros((len(sheet), block.features))
    if column is not None:
        days = indicators(sheet[column])
        added += days @ rng.normal(0.0, effect, (days.shape[1], block.features))
    if block.drift:
        position = 2 * sheet[f"{block.name}_order"].to_numpy() / len(sheet) - 1
        added += np.outer(position, block.drift * rng.normal(-1.0, 1.0, block.features))
    return added


def _time(block: Block, sheet: pd.DataFrame, trend: float, rng: np.random.Generator) -> np.ndarray | float:
    """Return the time course that all subjects have in common; each feature follows it with its own slope."""
    if not trend or "visit" not in sheet:
        return 0.0
    visit = sheet["visit"].to_numpy(dtype=float)
    return np.outer((visit - visit.mean()) / visit.std(), trend * rng.standard_normal(block.features))


def gamma_share(block: Block, design: Design) -> float:
    """Return the share of the noise that counting draws from a gamma distribution (negative binomial counts)."""
    if not block.counted:
        return 0.0
    plain = design.visits == 1 and math.isinf(block.tails)
    return 1.0 if plain else 1.0 - LOG_NORMAL_SHARE


def _noise(block: Block, design: Design, rng: np.random.Generator) -> np.ndarray:
    """Return noise of unit variance (for 2 degrees of freedom and fewer: unit scale), less its gamma share."""
    share = 1.0 - gamma_share(block, design)
    shape = (design.n, block.features)
    if not share:
        return np.zeros(shape)
    if math.isinf(block.tails):
        return math.sqrt(share) * rng.standard_normal(shape)
    scale = math.sqrt((block.tails - 2) / block.tails) if block.tails > 2 else 1.0
    return math.sqrt(share) * scale * rng.standard_t(block.tails, shape)


def _odd_rows(block: Block, design: Design, seed: int, rng: np.random.Generator) -> np.ndarray:
    """Return the rows that went wrong: the study's own first, then those of this block alone."""
    order = stream(seed, 0, 2).permutation(design.n)
    alone = rng.permutation(order[design.odd :])[: block.odd]
    return np.sort(np.concatenate([order[: design.odd], alone]))
