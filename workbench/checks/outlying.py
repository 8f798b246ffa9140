"""Samples unlike the others: far from what the other samples predict, or far out on a real component."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.evidence import SamplePlane, SampleValues
from workbench.checks.finding import Finding, accept_line, exclude_line, finding_id
from workbench.checks.space import DesignFree, design_free, signal_number
from workbench.checks.words import robust_z
from workbench.engine.linear import thin_basis
from workbench.engine.nuisance import FittedResiduals, fit_residuals
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

CHECK = "outlier"
FEWEST_SAMPLES = 8
FOLDS, FOLDS_FOR_NUMBER = 20, 5
LARGEST_VALUE, LARGEST_SQUARE = 6.0, 16.0
PRIOR_FREEDOM = 4.0
LEAST_RATIO = 3.0
LEAST_Z = 3.0
LEAST_SPREAD = 0.2
LEAST_FAR = 6.0
FAR_LEVEL = 0.003
CALIBRATION_DRAWS = 20_000


@dataclass(frozen=True, eq=False)
class HeldOutErrors:
    """Mean squared error of each sample from the components of the other samples, and their median's ratio.

    Attributes
    ----------
    ratio : ndarray of shape (n_samples,)
        Error over the median error; NaN for a sample whose design the others do not show.
    z : ndarray of shape (n_samples,)
        Robust distance of its logarithm from the median.
    """

    ratio: FloatArray
    z: FloatArray


def outlying_samples(data: StudyData) -> list[Finding]:
    """Find samples whose prepared values are unlike those of the others, block by block.

    Two rules. A sample is *unlike* when the components with signal that the other samples show leave three
    times as much of it as of the median sample, values cut at six standard deviations and errors at four, so
    that no single wild value decides. It is *far out* when it lies further from the median, on a component with
    signal, than one normal sample among n would in 3 of 1000 blocks, and at least six robust spreads.

    Nuisance and group are taken out first. At least eight samples are needed.
    """
    return [finding for block in data.blocks.values() for finding in _of_block(block)]


def _of_block(block: CheckedBlock) -> list[Finding]:
    if block.prepared is None or block.usable.size < FEWEST_SAMPLES:
        return []
    x, design = block.prepared[block.usable], block.design()
    errors = held_out_errors(x, design)
    unlike = [] if errors is None else np.flatnonzero(_unlike(errors)).tolist()
    space = design_free(x, design)
    far = {} if space is None else far_out(space)
    found = [_unlike_finding(block, errors, row) for row in unlike if errors is not None]
    found += [_far_finding(block, space, row, *far[row]) for row in far if row not in unlike and space]
    return found


def _unlike(errors: HeldOutErrors) -> NDArray[np.bool_]:
    return np.asarray(np.nan_to_num(errors.ratio) >= LEAST_RATIO) & (np.nan_to_num(errors.z) >= LEAST_Z)


def held_out_errors(x: FloatArray, design: FloatArray) -> HeldOutErrors | None:
    """Return how badly each sample is described by what the other samples have in common.

    In each fold the design, the features' spread (drawn towards the median spread with four degrees of
    freedom) and the components with signal are learnt without the samples that are looked at. None where too
    few samples are left in a fold.

    Parameters
    ----------
    x : ndarray of shape (n_samples, n_features)
    design : ndarray of shape (n_samples, n_columns)
    """
    n = x.shape[0]
    place = np.arange(n) % min(n, FOLDS)
    errors = np.full(n, np.nan)
    try:
        k = _components(x, design, place)
        for fold in range(place.max() + 1):
            errors[place == fold] = _fold_errors(x, design, place == fold, k)
    except NumericsError:
        return None
    known = errors[np.isfinite(errors) & (errors > 0)]
    if known.size < FEWEST_SAMPLES:
        return None
    ratio = errors / np.median(known)
    z = np.full(n, np.nan)
    seen = np.isfinite(ratio) & (ratio > 0)
    z[seen] = robust_z(np.log(ratio[seen]), LEAST_SPREAD)
    return HeldOutErrors(ratio, z)


def _components(x: FloatArray, design: FloatArray, place: NDArray[np.intp]) -> int:
    """Return the number of components with signal, the median over some folds' training samples."""
    folds = np.unique(np.linspace(0, place.max(), FOLDS_FOR_NUMBER).round())
    numbers = []
    for fold in folds:
        known, _, _ = _scaled(x, design, place == fold)
        numbers.append(signal_number(known, thin_basis(known)))
    return int(np.median(numbers))


def _scaled(
    x: FloatArray, design: FloatArray, test: NDArray[np.bool_]
) -> tuple[FloatArray, FloatArray, FittedResiduals]:
    """Return training and test samples without the design, at the training samples' spread."""
    fitted = fit_residuals(design[~test], x[~test])
    freedom = int(np.count_nonzero(~test)) - fitted.rank
    variance = fitted.scale[fitted.varies] ** 2
    scale = np.sqrt((freedom * variance + PRIOR_FREEDOM * np.median(variance)) / (freedom + PRIOR_FREEDOM))
    known = fitted.transform(design[~test], x[~test])[:, fitted.varies] / scale
    asked = fitted.transform(design[test], x[test])[:, fitted.varies] / scale
    return known, np.clip(asked, -LARGEST_VALUE, LARGEST_VALUE), fitted


def _fold_errors(x: FloatArray, design: FloatArray, test: NDArray[np.bool_], k: int) -> FloatArray:
    known, asked, fitted = _scaled(x, design, test)
    basis = thin_basis(known)
    loadings = (basis.vectors[:, :k] / basis.lengths[:k]).T @ known
    rest = asked - (asked @ loadings.T) @ loadings
    errors = np.minimum(rest**2, LARGEST_SQUARE).mean(axis=1) / (1.0 + _leverage(design, ~test, test))
    errors[~fitted.estimable(design[test], int(test.sum()))] = np.nan
    return np.asarray(errors)


def _leverage(design: FloatArray, train: NDArray[np.bool_], test: NDArray[np.bool_]) -> FloatArray:
    """Return the share of noise that the design of the training samples adds to a prediction of the others."""
    columns = np.column_stack([np.ones(design.shape[0]), design])
    weights = columns[test] @ np.linalg.pinv(columns[train])
    return np.asarray(np.sum(weights**2, axis=1))


def far_out(space: DesignFree) -> dict[int, tuple[int, float]]:
    """Return, for each sample far out on a component with signal, that component (from 0) and its distance."""
    scores = space.scores
    if scores.shape[1] == 0:
        return {}
    distance = np.column_stack([np.abs(robust_z(score)) for score in (scores / np.sqrt(_room(space))).T])
    limit = max(LEAST_FAR, far_limit(*scores.shape))
    return {
        int(row): (int(distance[row].argmax()), float(distance[row].max()))
        for row in np.flatnonzero(distance.max(axis=1) > limit)
    }


def _room(space: DesignFree) -> FloatArray:
    return np.maximum(space.room, 1.0 / space.room.size)[:, None]


@lru_cache(maxsize=64)
def far_limit(n: int, components: int) -> float:
    """Return the robust distance that the furthest of n normal samples passes in ``0.003 / components`` of draws.

    By simulation with a fixed seed: 20,000 draws at small n, where it matters, 5,000 at least.
    """
    rng = np.random.default_rng(n)
    draws = min(CALIBRATION_DRAWS, max(5_000, 4_000_000 // n))
    values = rng.standard_normal((draws, n))
    away = np.abs(values - np.median(values, axis=1, keepdims=True))
    furthest = away.max(axis=1) / (1.4826 * np.median(away, axis=1))
    return float(np.quantile(furthest, 1.0 - max(FAR_LEVEL / components, 1.0 / draws)))


def _unlike_finding(block: CheckedBlock, errors: HeldOutErrors, row: int) -> Finding:
    sample = block.samples[block.usable[row]]
    what = (
        f"sample '{sample}' is unlike the other samples of block '{block.name}': what they have in common leaves "
        f"{errors.ratio[row]:.1f} times as much of it as of the median sample"
    )
    names = block.take(block.usable)
    label = "error from the others (median = 1)"
    evidence = SampleValues(names, errors.ratio, label, (row,), LEAST_RATIO, log_scale=True)
    return _finding(block, sample, what, evidence)


def _far_finding(
    block: CheckedBlock, space: DesignFree, row: int, component: int, distance: float
) -> Finding:
    sample = block.samples[block.usable[row]]
    what = (
        f"sample '{sample}' lies {distance:.0f} robust spreads from the median of block '{block.name}' on component "
        f"{component + 1} of what the design leaves"
    )
    scores, other = space.scores, 1 if component == 0 else 0
    vertical = scores[:, other] if scores.shape[1] > 1 else np.zeros(scores.shape[0])
    labels = (f"component {component + 1}", f"component {other + 1}" if scores.shape[1] > 1 else "")
    evidence = SamplePlane(block.take(block.usable), scores[:, component], vertical, labels, (row,))
    return _finding(block, sample, what, evidence)


def _finding(block: CheckedBlock, sample: str, what: str, evidence: object) -> Finding:
    identity = finding_id(CHECK, block.name, sample)
    todo = (
        f"ask the laboratory about it; leave it out with {exclude_line(block.name, [sample], 'why')}, "
        f"or keep it with {accept_line(identity)}"
    )
    return Finding(identity, CHECK, "warning", block.name, what, (sample,), (), todo, evidence)
