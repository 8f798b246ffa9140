"""Blocks whose numbers look like another kind than the one that is declared."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.evidence import ValueSpread
from workbench.checks.finding import Finding, Severity, accept_line, finding_id
from workbench.checks.words import percent

FloatArray = NDArray[np.float64]

CHECK = "kind"
FEWEST_FEATURES = 20
FEWEST_CELLS = 100
NO_LOGARITHM = 100.0
LOG_TOP, LOG_RANGE, LOG_VARIES = 64.0, 20.0, 0.2
SMALL_COUNT, SMALL_SHARE = 10.0, 0.005
LARGE_MEDIAN = 1e4
TWICE_LOW, TWICE_HIGH, TWICE_RANGE, TWICE_SPREAD = 0.3, 6.0, 1.5, 0.12
SAME_SUM = 1e-3
MOST_DRAWN = 5_000
SHARES = ("proportions", "beta")
WANTED = {
    "counts": "whole counts",
    "intensities": "the intensities before any logarithm",
    "log": "their logarithms",
    "beta": "beta values",
    "proportions": "proportions",
}


@dataclass(frozen=True)
class Figures:
    """What tells kinds of values apart; all over the cells that have a value.

    Attributes
    ----------
    whole, negative, small_counts : float
        Share of cells that are whole numbers, that are negative, and that are 1 to 9.
    low, median, high, top : float
        1 %, 50 % and 99 % point, and the largest value.
    positive_low : float
        1 % point of the values above 0.
    varies : float
        Median over features of standard deviation over mean: a few percent in logarithms of large numbers.
    spread : float
        Median standard deviation of a feature.
    level_range : float
        Distance of the 1 % and the 99 % point of the features' medians.
    sums_vary : float
        Coefficient of variation of the samples' sums.
    """

    whole: float
    negative: float
    small_counts: float
    low: float
    median: float
    high: float
    top: float
    positive_low: float
    varies: float
    spread: float
    level_range: float
    sums_vary: float


def check_kinds(data: StudyData) -> list[Finding]:
    """Find blocks whose values cannot be, or do not look like, what they are declared as.

    Errors, where the numbers are impossible for the kind: counts that are no whole numbers or negative,
    negative intensities or shares, beta values over 1, logarithms over 100. Warnings, by the figures of
    :class:`Figures`: logarithms declared as intensities, counts declared as intensities or as continuous,
    intensities declared as counts, logarithms taken twice, samples that all add up to the same sum. Blocks of
    fewer than 20 features or 100 cells are looked at for impossible numbers alone, mixed ones not at all.
    """
    return [finding for block in data.blocks.values() for finding in _of_block(block)]


def _of_block(block: CheckedBlock) -> list[Finding]:
    cells = block.measured[~np.isnan(block.measured)]
    if block.values == "mixed" or cells.size == 0:
        return []
    figures = figures_of(block.measured)
    found = _impossible(block, figures)
    if not found and len(block.features) >= FEWEST_FEATURES and cells.size >= FEWEST_CELLS:
        found = _unlikely(block, figures) + _same_sums(block, figures)
    return found


def figures_of(measured: FloatArray) -> Figures:
    """Return the figures that tell kinds of values apart; ``measured`` has at least one value."""
    cells = measured[~np.isnan(measured)]
    low, median, high = np.quantile(cells, [0.01, 0.5, 0.99])
    positive = cells[cells > 0]
    whole = cells == np.rint(cells)
    held = (~np.isnan(measured)).sum(axis=0) >= 3
    mean, spread, middle = _by_feature(measured[:, held])
    sums = np.nansum(measured, axis=1)
    return Figures(
        whole=float(whole.mean()),
        negative=float((cells < 0).mean()),
        small_counts=float(np.mean(whole & (cells > 0) & (cells < SMALL_COUNT))),
        low=float(low),
        median=float(median),
        high=float(high),
        top=float(cells.max()),
        positive_low=float(np.quantile(positive, 0.01)) if positive.size else float("nan"),
        varies=_relative(mean, spread),
        spread=float(np.median(spread)) if spread.size else float("nan"),
        level_range=float(np.ptp(np.quantile(middle, [0.01, 0.99]))) if middle.size else float("nan"),
        sums_vary=float(sums.std() / abs(sums.mean())) if sums.mean() != 0 else float("nan"),
    )


def _by_feature(measured: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    if measured.shape[1] == 0:
        return np.empty(0), np.empty(0), np.empty(0)
    return np.nanmean(measured, axis=0), np.nanstd(measured, axis=0, ddof=1), np.nanmedian(measured, axis=0)


def _relative(mean: FloatArray, spread: FloatArray) -> float:
    usable = mean > 0
    return float(np.median(spread[usable] / mean[usable])) if usable.any() else float("nan")


def _impossible(block: CheckedBlock, figures: Figures) -> list[Finding]:
    kind, name = block.values, f"block '{block.name}'"
    if kind == "counts" and (figures.whole < 1.0 or figures.negative > 0.0):
        share = percent(1.0 - figures.whole)
        what = f"{name} is declared as counts, but {share} of its values are no whole numbers"
        if figures.negative > 0.0:
            what = f"{name} is declared as counts, but {percent(figures.negative)} of its values are negative"
        return [_finding(block, "no_counts", "error", what, _alternative(figures))]
    if kind == "intensities" and figures.negative > 0.0:
        what = (
            f"{name} is declared as intensities, but {percent(figures.negative)} of its values are negative"
        )
        return [_finding(block, "negative", "error", what, "log")]
    if kind in SHARES and (figures.negative > 0.0 or (kind == "beta" and figures.top > 1.0)):
        what = f"{name} is declared as {kind}, but its values run outside of 0 to 1"
        return [
            _finding(block, "no_shares", "error", what, "log" if figures.negative > 0.0 else "continuous")
        ]
    if kind == "log" and figures.high > NO_LOGARITHM:
        what = (
            f"{name} is declared as log, but 1 % of its values are over {figures.high:,.0f}: no logarithm of a "
            "measurement is that large"
        )
        return [_finding(block, "no_logarithms", "error", what, _alternative(figures))]
    return []


def _alternative(figures: Figures) -> str:
    """Return what values that are not of the declared kind most likely are."""
    if figures.negative > 0.0 or _like_logs(figures):
        return "log"
    return "counts" if figures.whole == 1.0 and figures.small_counts > 0.0 else "intensities"


def _like_logs(figures: Figures) -> bool:
    """Return whether features lie as close together, and each varies as little, as in logarithms."""
    if not (figures.positive_low > 0.0 and figures.top <= LOG_TOP):
        return False
    return figures.high <= LOG_RANGE * figures.positive_low and figures.varies <= LOG_VARIES


def _like_counts(figures: Figures) -> bool:
    return figures.whole == 1.0 and figures.small_counts >= SMALL_SHARE and figures.top >= NO_LOGARITHM


def _twice(figures: Figures) -> bool:
    """Return whether values are as if the logarithm had been taken twice: all positive, close together."""
    return (
        figures.low > TWICE_LOW
        and figures.high < TWICE_HIGH
        and figures.level_range < TWICE_RANGE
        and figures.spread < TWICE_SPREAD
    )


def _unlikely(block: CheckedBlock, figures: Figures) -> list[Finding]:
    kind, name = block.values, f"block '{block.name}'"
    if kind == "intensities" and _like_logs(figures):
        what = (
            f"{name} is declared as intensities, but its values look like logarithms: {figures.low:.3g} to "
            f"{figures.high:.3g} (1 % and 99 % point), and a feature's standard deviation is "
            f"{percent(figures.varies)} of its mean"
        )
        return [_finding(block, "logarithms", "warning", what, "log")]
    if kind in ("intensities", "continuous") and _like_counts(figures):
        what = (
            f"{name} is declared as {kind}, but its values look like counts: all are whole numbers, and "
            f"{percent(figures.small_counts)} of them are 1 to 9"
        )
        return [_finding(block, "counts", "warning", what, "counts")]
    if kind == "counts" and figures.median > LARGE_MEDIAN and figures.positive_low > SMALL_COUNT:
        what = (
            f"{name} is declared as counts, but its values look like rounded intensities: the median is "
            f"{figures.median:,.0f}, and hardly any is under {SMALL_COUNT:.0f}"
        )
        return [_finding(block, "intensities", "warning", what, "intensities")]
    if kind == "log" and _twice(figures):
        what = (
            f"{name} is declared as log, but its values lie so close together ({figures.low:.3g} to "
            f"{figures.high:.3g}, a feature's standard deviation {figures.spread:.2g}) that the logarithm may have "
            "been taken twice"
        )
        return [_finding(block, "twice", "warning", what, "log")]
    return []


def _same_sums(block: CheckedBlock, figures: Figures) -> list[Finding]:
    """Find samples that add up to the same sum: shares of a whole, or counts that were made equal."""
    closed = block.values in ("counts", "intensities", "continuous") and block.layer != "microbes"
    closed &= figures.negative == 0.0
    if not closed or not figures.sums_vary < SAME_SUM or np.isnan(block.measured).any():
        return []
    total = float(block.measured.sum(axis=1).mean())
    what = (
        f"every sample of block '{block.name}' adds up to {total:,.6g}: these are shares of a whole, or values made "
        "to fit one sum, where one feature's rise lowers all others"
    )
    identity = finding_id(CHECK, block.name, "same_sums")
    todo = (
        "deliver the values before they were scaled, or declare shares as what they are: "
        f'[blocks.{block.name}] values = "proportions"; or keep it with {accept_line(identity)}'
    )
    return [Finding(identity, CHECK, "warning", block.name, what, (), (), todo, _spread(block))]


def _finding(block: CheckedBlock, word: str, severity: Severity, what: str, instead: str) -> Finding:
    identity = finding_id(CHECK, block.name, word)
    line = f'[blocks.{block.name}] values = "{instead}"'
    todo = f"declare what they are: {line}, or deliver {WANTED.get(block.values, 'other values')}"
    if word == "twice":
        todo = "ask how the table was made, and deliver values with one logarithm at most"
    if severity == "warning":
        todo += f"; or keep it with {accept_line(identity)}"
    usable = severity != "error" or block.prepared is not None
    return Finding(identity, CHECK, severity, block.name, what, (), (), todo, _spread(block), usable)


def _spread(block: CheckedBlock) -> ValueSpread:
    cells = block.measured[~np.isnan(block.measured)]
    step = max(1, cells.size // MOST_DRAWN)
    return ValueSpread(cells[::step], block.values, f"values of {block.name} as delivered")
