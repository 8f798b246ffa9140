"""From the signal of a block to the values that a laboratory delivers."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from scipy.special import logit

from .biology import COPY_NOISE, Signal
from .design import Block

DEPTH_SPREAD = 0.3
"""Standard deviation of the log library sizes."""

COUNT_SPREAD = 2.0
"""Standard deviation of the log mean counts of the features."""

SILENT_LEVEL = 1e-4
"""Factor on the mean count of a feature that is hardly there, as an unexpressed gene."""

LOW_GAPS = 0.8
"""Share of the gaps that are there because the value is low; the others come by chance."""

LOW_GAP_WIDTH = 0.15
"""Softness of the detection limit on the natural-log scale: the scale of a logistic distribution."""


def delivered_values(block: Block, signal: Signal, gamma: float, rng: np.random.Generator) -> pd.DataFrame:
    """Return the block's table, samples x features, rows in the order of the signal.

    `gamma` is the share of the noise of counts that is drawn here.
    """
    names = pd.Index([f"{block.name[:4]}{j:05d}" for j in range(1, block.features + 1)])
    if block.values == "mixed":
        return _mixed(block, _copied(signal.latent, signal.copies, 1.0, rng), names, rng)
    values = _counts(block, signal, gamma, rng) if block.counted else _readings(block, signal, rng)
    return pd.DataFrame(values, columns=names)


def _copied(logs: np.ndarray, copies: np.ndarray, unit: float, rng: np.random.Generator) -> np.ndarray:
    """Return the logs with near copies in place of the columns that are to be copies."""
    noise = COPY_NOISE * unit * rng.standard_normal((len(logs), len(copies)))
    result = logs.copy()
    result[:, copies[:, 0]] = logs[:, copies[:, 1]] + noise
    return result


def dispersions(means: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Return negative binomial dispersions: a floor of 0.12 and 3 / mean, spread log-normally by 0.4.

    A trend of this form is fitted to sequencing counts by Anders & Huber 2010, Genome Biol 11:R106; floor and
    slope are typical of outbred samples (common practice).
    """
    return np.minimum((0.12 + 3.0 / means) * rng.lognormal(0.0, 0.4, means.shape), 1.5)


def _counts(block: Block, signal: Signal, gamma: float, rng: np.random.Generator) -> np.ndarray:
    """Return counts, variance mean + dispersion * mean^2 around the signal; or the shares they make up."""
    n, p = signal.latent.shape
    means = np.exp(rng.normal(np.log(block.depth), COUNT_SPREAD, p))
    outside = ~signal.loadings.any(axis=1)
    means[outside & (rng.random(p) < block.silent)] *= SILENT_LEVEL
    alpha = dispersions(means, rng)
    logs = np.sqrt(alpha) * signal.latent
    if gamma:
        shape = 1.0 / (gamma * alpha)
        logs = logs + np.log(np.maximum(rng.standard_gamma(shape, (n, p)) / shape, 1e-12))
    rates = means * np.exp(np.clip(_copied(logs, signal.copies, 0.4, rng), -20, 12))
    if block.closed or block.values == "proportions":
        rates *= means.sum() / rates.sum(axis=1, keepdims=True)
    counts = rng.poisson(rates * rng.lognormal(0.0, DEPTH_SPREAD, (n, 1)))
    if block.values == "proportions":
        return np.asarray(counts / np.maximum(counts.sum(axis=1, keepdims=True), 1))
    return np.asarray(counts)


def _readings(block: Block, signal: Signal, rng: np.random.Generator) -> np.ndarray:
    """Return intensities, log ratios (base 2) or continuous readings with their gaps."""
    n, p = signal.latent.shape
    unit = rng.uniform(0.3, 0.6, p)
    logs = _copied(unit * signal.latent, signal.copies, 0.4, rng)
    logs += unit * block.technical * rng.standard_normal((n, p))
    logs += rng.normal(0.0, block.dilution, (n, 1))
    abundance = rng.normal(0.0, 1.5, p)
    if block.values == "intensities":
        values = np.round(np.exp(np.log(2e5) + abundance + logs), 1)
    elif block.values == "log":
        values = np.round(logs / np.log(2), 4)
    else:
        values = np.round(10 + 5 * abundance + 2 * logs, 4)
    low = block.values in ("intensities", "log")
    values[_gaps(abundance + logs, block.gaps, LOW_GAPS * low, rng)] = np.nan
    return values


def _gaps(logs: np.ndarray, share: float, low: float, rng: np.random.Generator) -> np.ndarray:
    """Return the missing cells: a part `low` of them under a soft detection limit, the rest anywhere."""
    seen = logs + LOW_GAP_WIDTH * logit(rng.uniform(1e-12, 1.0, logs.shape))
    missing = seen < np.quantile(seen, share * low)
    return np.asarray(missing | (rng.random(logs.shape) < share * (1 - low)))


def _mixed(block: Block, latent: np.ndarray, names: pd.Index, rng: np.random.Generator) -> pd.DataFrame:
    """Return clinical readings: of every four columns two are numbers, one is yes or no, one has three levels."""
    missing = rng.random(latent.shape) < block.gaps
    columns: dict[str, Any] = {}
    for j, name in enumerate(names):
        reading = latent[:, j]
        if j % 4 == 2:
            column = np.where(reading > rng.normal(0.0, 0.3), "yes", "no").astype(object)
        elif j % 4 == 3:
            column = np.array(["low", "mid", "high"], dtype=object)[np.digitize(reading, [-0.7, 0.7])]
        else:
            column = np.round(50 + 10 * reading, 1)
        column[missing[:, j]] = np.nan
        columns[name] = column
    return pd.DataFrame(columns)
