"""Blocks of a known number of factors, with noise that differs between features and between samples."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

SAMPLES = (24, 30, 36, 48, 60, 72, 96)
NOISES = ("normal", "heavy tails", "unequal samples")


@dataclass(frozen=True, eq=False)
class FactorBlock:
    """A block, its factors, and the true noise of its samples and features (standard deviations).

    ``ratios`` holds each factor's variance, in units of noise, over the one from which on a factor of many
    features parts from the noise at all, ``sqrt(p / n)``.
    """

    x: np.ndarray
    factors: np.ndarray
    ratios: np.ndarray
    sample_noise: np.ndarray
    feature_noise: np.ndarray
    noise: str

    @property
    def truth(self) -> int:
        return self.factors.shape[1]


def factor_block(
    seed: int,
    *,
    n: int | None = None,
    p: int | None = None,
    factors: int | None = None,
    noise: str | None = None,
) -> FactorBlock:
    """Draw a block: 24 to 96 samples, 200 to 3,000 features, 0 to 8 factors, each in 5 to 60 % of the features.

    Three in ten factors have two levels, the others are normal. Features differ in noise by a factor of 1.65
    (log-normal), samples by 1.22 where ``noise`` is "unequal samples".
    """
    rng = np.random.default_rng(seed)
    drawn = (
        rng.choice(SAMPLES),
        np.exp(rng.uniform(np.log(200), np.log(3000))),
        rng.integers(9),
        rng.choice(NOISES),
    )
    n, p, count = (
        int(given if given is not None else d) for given, d in zip((n, p, factors), drawn, strict=False)
    )
    noise = str(noise if noise is not None else drawn[3])
    scores = rng.normal(size=(n, count))
    for k in np.flatnonzero(rng.random(count) < 0.3):
        scores[:, k] = rng.permutation(np.arange(n) % 2 * 2.0 - 1.0)
    ratios = np.exp(rng.uniform(0.0, np.log(25.0), count))
    loadings = np.zeros((count, p))
    for k in range(count):
        members = rng.choice(
            p, max(10, int(p * np.exp(rng.uniform(np.log(0.05), np.log(0.6))))), replace=False
        )
        drawn_loadings = rng.normal(size=members.size)
        wanted = np.sqrt(ratios[k] * np.sqrt(p / n))
        loadings[k, members] = drawn_loadings * wanted / np.linalg.norm(drawn_loadings)
    by_feature = rng.lognormal(0.0, 0.5, p)
    by_sample = rng.lognormal(0.0, 0.2, n) if noise == "unequal samples" else np.ones(n)
    errors = (
        rng.standard_t(5, (n, p)) / np.sqrt(5.0 / 3.0) if noise == "heavy tails" else rng.normal(size=(n, p))
    )
    x = (scores @ loadings + errors * by_sample[:, None]) * by_feature
    return FactorBlock(x, scores, ratios, by_sample, by_feature, noise)


def scaled(x: np.ndarray) -> np.ndarray:
    """Return centred columns at unit variance."""
    z = x - x.mean(axis=0)
    return z / z.std(axis=0, ddof=1)


def oracle_sees(block: FactorBlock, seed: int, draws: int = 30) -> bool:
    """Whether one who knows the noise of every sample and feature sees all factors of a block.

    With the true noise divided out, the eigenvalue of the last factor must pass what the largest of pure noise
    stays under in 95 of 100 draws, in the dimensions that the other factors and the mean leave.
    """
    if block.truth == 0:
        return True
    rng = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(1,)))
    n, p = block.x.shape
    pure = block.x / block.feature_noise / block.sample_noise[:, None]
    pure = pure - pure.mean(axis=0)
    last = np.linalg.eigvalsh(pure @ pure.T)[-block.truth]
    noise = (rng.normal(size=(n - block.truth, p)) for _ in range(draws))
    return bool(last > np.quantile([np.linalg.eigvalsh(g @ g.T)[-1] for g in noise], 0.95))
