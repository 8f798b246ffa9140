"""How much was measured of each sample: depth, and the share of gaps."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.stats import binom

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.evidence import SampleValues
from workbench.checks.finding import Finding, accept_line, exclude_line, finding_id
from workbench.checks.words import percent, robust_z

FloatArray = NDArray[np.float64]

FEWEST_SAMPLES = 6
FEWEST_FEATURES = 10
SHALLOW_Z = 4.0
SHALLOW_RATIO = 4.0
LEAST_LOG_SPREAD = 0.1
GAPPY_Z = 5.0
GAPPY_MORE = 0.15
LEAST_GAP_SPREAD = 0.01
MOST_GAPPY, MOST_GAPPY_SHARE = 2, 0.1
GAPPY_CHANCE = 1e-4
ON_A_SCALE = ("counts", "intensities")


def check_depth(data: StudyData) -> list[Finding]:
    """Find samples of which nothing, much less, or with many more gaps than of the others was measured.

    Error: no value at all (for counts and intensities: nothing above 0). Warning: depth (the typical ratio to
    the other samples) under a quarter of the median, or over four times it, and four robust spreads away on a
    log scale. Warning: the missing share 15 points over the median, five robust spreads above it, and more than
    gaps that fall by chance bring about in one of 10,000 blocks; unless a tenth of the samples (and more than
    two) are as far, since gaps of many samples are a pattern, not an odd sample. For counts a gap is a feature
    without a read that most samples have.
    """
    return [
        finding
        for block in data.blocks.values()
        if block.samples
        for finding in [*_empty(block), *_unusual_depth(block), *_gappy(block)]
    ]


def _seen(block: CheckedBlock) -> NDArray[np.bool_]:
    """Return which cells hold a value; zero is none for counts and intensities."""
    held = ~np.isnan(block.measured)
    return held & (block.measured > 0) if block.values in ON_A_SCALE else held


def _empty(block: CheckedBlock) -> list[Finding]:
    rows = np.flatnonzero(~_seen(block).any(axis=1))
    return [
        Finding(
            finding_id("empty_sample", block.name, block.samples[row]),
            "empty_sample",
            "error",
            block.name,
            f"sample '{block.samples[row]}' has no value in block '{block.name}'",
            (block.samples[row],),
            todo=f"leave it out with {exclude_line(block.name, [block.samples[row]], 'not measured')}",
            acceptable=block.prepared is not None,
        )
        for row in rows
    ]


def sample_depth(block: CheckedBlock) -> tuple[FloatArray, str]:
    """Return how deep each sample is: the median ratio of its values to the features' medians.

    Over the features that at least half of the samples have; for counts with fewer than ten such features the
    total count. NaN for a sample without any of them. The second value says which it is.
    """
    seen = _seen(block)
    common = seen.mean(axis=0) >= 0.5
    if block.values == "counts" and common.sum() < FEWEST_FEATURES:
        return np.where(seen, block.measured, 0.0).sum(axis=1), "total count"
    depth = np.full(len(block.samples), np.nan)
    if common.any():
        values = np.where(seen[:, common], block.measured[:, common], np.nan)
        away = np.log(values) - np.log(np.nanmedian(values, axis=0))
        held = ~np.isnan(away).all(axis=1)
        depth[held] = np.exp(np.nanmedian(away[held], axis=1))
    return depth, "depth" if block.values == "counts" else "level"


def _unusual_depth(block: CheckedBlock) -> list[Finding]:
    if block.values not in ON_A_SCALE or len(block.samples) < FEWEST_SAMPLES:
        return []
    depth, label = sample_depth(block)
    known = np.flatnonzero(np.nan_to_num(depth) > 0)
    if known.size < FEWEST_SAMPLES:
        return []
    ratio = depth / np.median(depth[known])
    z = np.zeros(depth.size)
    z[known] = robust_z(np.log(depth[known]), LEAST_LOG_SPREAD)
    unusual = [
        row for row in known if abs(z[row]) > SHALLOW_Z and abs(np.log(ratio[row])) > np.log(SHALLOW_RATIO)
    ]
    return [_depth_finding(block, depth, label, int(row), float(ratio[row])) for row in unusual]


def _depth_finding(block: CheckedBlock, depth: FloatArray, label: str, row: int, ratio: float) -> Finding:
    sample = block.samples[row]
    total = f" ({np.nansum(block.measured[row]):,.0f} reads)" if block.values == "counts" else ""
    what = f"sample '{sample}' of block '{block.name}' has {ratio:.2g} times the {label} of the median sample{total}"
    identity = finding_id("depth", block.name, sample)
    todo = (
        f"what was seen in it differs for that reason alone; measure it again, leave it out with "
        f"{exclude_line(block.name, [sample], 'too shallow' if ratio < 1 else 'too deep')}, or keep it with "
        f"{accept_line(identity)}"
    )
    evidence = SampleValues(
        block.samples, depth, f"{label} against the other samples", (row,), log_scale=True
    )
    return Finding(identity, "depth", "warning", block.name, what, (sample,), (), todo, evidence)


def _gappy(block: CheckedBlock) -> list[Finding]:
    seen = _seen(block)
    common = seen.mean(axis=0) >= 0.5
    if len(block.samples) < FEWEST_SAMPLES or common.sum() < FEWEST_FEATURES:
        return []
    share = 1.0 - seen[:, common].mean(axis=1)
    least = max(LEAST_GAP_SPREAD, float(np.sqrt(np.median(share) * (1 - np.median(share)) / common.sum())))
    z = robust_z(share, least)
    more = share > np.median(share) + GAPPY_MORE
    if more.sum() > max(MOST_GAPPY, MOST_GAPPY_SHARE * share.size):
        return []
    number = int(common.sum())
    by_chance = binom.sf(np.rint(share * number) - 1, number, share.mean()) * share.size
    rows = np.flatnonzero((z > GAPPY_Z) & more & (share < 1.0) & (by_chance <= GAPPY_CHANCE))
    return [_gap_finding(block, share, int(row)) for row in rows]


def _gap_finding(block: CheckedBlock, share: FloatArray, row: int) -> Finding:
    sample = block.samples[row]
    what = (
        f"sample '{sample}' lacks {percent(float(share[row]))} of the features that most samples of block "
        f"'{block.name}' have; the median sample lacks {percent(float(np.median(share)))}"
    )
    identity = finding_id("gaps", block.name, sample)
    todo = (
        f"preparation would invent these values; leave the sample out with "
        f"{exclude_line(block.name, [sample], 'mostly missing')}, or keep it with {accept_line(identity)}"
    )
    evidence = SampleValues(
        block.samples, share, "missing share of common features", (row,), float(np.median(share))
    )
    return Finding(identity, "gaps", "warning", block.name, what, (sample,), (), todo, evidence)
