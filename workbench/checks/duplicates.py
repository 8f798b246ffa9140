"""Samples and features that stand twice in a block, and features without any variation."""

from __future__ import annotations

from collections import defaultdict

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln
from scipy.stats import chi2

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.evidence import TwoSamples
from workbench.checks.finding import Finding, accept_line, exclude_line, finding_id
from workbench.checks.words import percent, some
from workbench.engine.linear import thin_basis
from workbench.engine.signal_components import signal_components
from workbench.intake.faults import counted
from workbench.intake.suggest import suggest_columns

FloatArray = NDArray[np.float64]

SAMPLES_CHECK = "duplicated_samples"
FEATURES_CHECK = "duplicated_features"
CONSTANT_CHECK = "constant_features"
FEWEST_SAMPLES, FEWEST_FEATURES = 5, 20
NEAR = 0.25
NARROW, WIDE = 2, 5
NEAR_BY_CHANCE, EQUAL_BY_CHANCE = 1e-6, 1e-3
SAME_SHARE = 0.95
SAME_TOLERANCE = 1e-6
FEWEST_SAME = 10
MOST_PAIRS = 10
MOSTLY = 0.5
MOST_DRAWN = 3_000


def check_duplicates(data: StudyData) -> list[Finding]:
    """Find samples that are (nearly) copies of each other, features that are, and features that never vary.

    Samples: an error where 95 % of the cells that tell samples apart are equal, or equal but for one factor;
    a warning where two samples are four times as close as samples of the block are to their neighbours, closer
    than chance would bring any pair in one of a million blocks, and not of one subject. Features: those with equal
    values in all samples, where chance explains it in fewer than 1 of 1000 blocks.
    """
    subjects = _subjects(data)
    found = []
    for block in data.blocks.values():
        found += _samples(block, subjects) + _features(block) + _constants(block)
    return found


def _subjects(data: StudyData) -> dict[str, str]:
    """Return the subject of each sample, by the settings or by the looks of a column."""
    column = data.settings.samples.subject or next(iter(suggest_columns(data.sheet).subject), None)
    if column is None or column not in data.sheet:
        return {}
    return {str(sample): str(cell) for sample, cell in data.sheet[column].dropna().items()}


def _samples(block: CheckedBlock, subjects: dict[str, str]) -> list[Finding]:
    if len(block.samples) < FEWEST_SAMPLES:
        return []
    values = _comparable(block)
    found = []
    for i, j in near_pairs(values)[:MOST_PAIRS]:
        one, other = block.samples[i], block.samples[j]
        same = same_share(block.measured, i, j)
        if same >= SAME_SHARE:
            found.append(_copied(block, i, j, same))
        elif one not in subjects or subjects.get(one) != subjects.get(other):
            found.append(_near(block, values, i, j))
    return found


def _comparable(block: CheckedBlock) -> FloatArray:
    """Return features at unit variance: prepared ones, or measured ones (gaps at the feature's mean)."""
    values = block.prepared
    if values is None:
        values = block.measured
        if block.values in ("counts", "intensities") and not (values < 0).any():
            values = np.log1p(values)
        held = ~np.isnan(values).all(axis=0)
        values = values[:, held]
        values = np.where(np.isnan(values), np.nanmean(values, axis=0), values)
    spread = values.std(axis=0)
    varies = spread > 1e-10 * np.maximum(np.abs(values).max(axis=0, initial=0.0), 1e-300)
    scaled: FloatArray = (values[:, varies] - values[:, varies].mean(axis=0)) / spread[varies]
    return scaled


def near_pairs(values: FloatArray) -> list[tuple[int, int]]:
    """Return pairs of samples far closer to each other than samples are to their neighbours, closest first.

    A pair counts when its squared distance is at most a quarter of the median distance to the nearest
    neighbour, or of that of each of the two to any third sample; and chance brings a pair so close in at most
    one of a million blocks: chi-squared laws with the effective number of features of the whole block, and of
    what its components with signal leave.

    Parameters
    ----------
    values : ndarray of shape (n_samples, n_features)
        Features at unit variance; fewer than 20 of them tell samples apart too coarsely, and no pair is near.
    """
    n, p = values.shape
    if n < FEWEST_SAMPLES or p < FEWEST_FEATURES:
        return []
    kernel = values @ values.T
    lengths = np.diag(kernel)
    squared = np.maximum(lengths[:, None] + lengths - 2.0 * kernel, 0.0)
    rows, columns = np.triu_indices(n, 1)
    distances = squared[rows, columns]
    by_chance = _chance(values, distances) * distances.size
    np.fill_diagonal(squared, np.inf)
    nearest = float(np.median(squared.min(axis=1)))
    third = np.partition(squared, 1, axis=1)[:, 1]
    near = (distances <= NEAR * nearest) | (distances <= NEAR * np.minimum(third[rows], third[columns]))
    chosen = np.flatnonzero(near & (by_chance <= NEAR_BY_CHANCE))
    chosen = chosen[np.argsort(distances[chosen], kind="stable")]
    return [(int(rows[k]), int(columns[k])) for k in chosen]


def _chance(values: FloatArray, distances: FloatArray) -> FloatArray:
    """Return the chance of a distance as small or smaller, by the law of the whole block or of its noise alone.

    The distance in the noise is at most the whole distance, so that its law bounds the chance from above; the
    law of the whole block covers blocks in which most samples have a copy and nothing is left as noise. With
    fewer than two features a sample neither law is exact, and the larger chance counts; from five features a
    sample on the effective number is that of the engine, below it the number that the eigenvalues show.
    """
    n, p = values.shape
    basis = thin_basis(values)
    squares = basis.lengths**2
    signal = signal_components(basis)
    rest = squares[signal.number :]
    whole = _chance_under(distances, squares.sum() / (n - 1), _evenly_spread(squares))
    if not rest.size:
        return whole
    if p < NARROW * n:
        return np.maximum(whole, _chance_under(distances, rest.sum() / (n - 1), _evenly_spread(rest)))
    effective = signal.effective_features if p >= WIDE * n else _evenly_spread(rest)
    return np.minimum(whole, _chance_under(distances, rest.mean(), effective))


def _evenly_spread(eigenvalues: FloatArray) -> float:
    """Return how many equal eigenvalues would be as unequal as these: their sum squared over the sum of squares."""
    return float(eigenvalues.sum() ** 2 / np.sum(eigenvalues**2))


def _chance_under(distances: FloatArray, variance: float, effective: float) -> FloatArray:
    """Return the chance of squared distances whose mean is twice the variance of a sample, under chi-squared."""
    return np.asarray(chi2.cdf(distances / (2.0 * variance) * effective, effective), dtype=np.float64)


def same_share(measured: FloatArray, i: int, j: int) -> float:
    """Return the share of cells in which two samples are equal, or equal but for one factor or one shift.

    Only features in which the samples of the block differ, and neither of the two is 0 or missing, count; with
    fewer than ten of them the share is 0.
    """
    one, other = measured[i], measured[j]
    told = ~np.isnan(one) & ~np.isnan(other) & (one != 0) & (other != 0)
    told[told] = np.nanmax(measured[:, told], axis=0) > np.nanmin(measured[:, told], axis=0)
    if told.sum() < FEWEST_SAME:
        return 0.0
    ratio, shift = one[told] / other[told], one[told] - other[told]
    size = SAME_TOLERANCE * np.abs(other[told])
    shares = (
        np.mean(np.abs(shift) <= size),
        np.mean(np.abs(shift - np.median(shift)) <= size),
        np.mean(np.abs(ratio / np.median(ratio) - 1.0) <= SAME_TOLERANCE),
    )
    return float(max(shares))


def _copied(block: CheckedBlock, i: int, j: int, same: float) -> Finding:
    names = (block.samples[i], block.samples[j])
    what = (
        f"samples '{names[0]}' and '{names[1]}' of block '{block.name}' are copies of each other: "
        f"{percent(same)} of the values that tell samples apart are equal or differ by one factor"
    )
    return _pair_finding(block, block.measured, i, j, what, error=True)


def _near(block: CheckedBlock, values: FloatArray, i: int, j: int) -> Finding:
    names = (block.samples[i], block.samples[j])
    away = float(np.sum((values[i] - values[j]) ** 2))
    kernel = values @ values.T
    typical = 2.0 * float(np.trace(kernel)) / len(block.samples)
    what = (
        f"samples '{names[0]}' and '{names[1]}' of block '{block.name}' are nearly the same: their squared distance "
        f"is {percent(away / typical)} of that of two samples of the block"
    )
    return _pair_finding(block, values, i, j, what, error=False)


def _pair_finding(block: CheckedBlock, values: FloatArray, i: int, j: int, what: str, error: bool) -> Finding:
    names = (block.samples[i], block.samples[j])
    identity = finding_id(SAMPLES_CHECK, block.name, *names)
    todo = (
        f"ask which of the two was measured; leave the other out with "
        f"{exclude_line(block.name, [names[1]], f'copy of {names[0]}')}, or keep both with {accept_line(identity)}"
    )
    step = max(1, values.shape[1] // MOST_DRAWN)
    label = "measured value" if error else "prepared value, scaled"
    evidence = TwoSamples(names, values[i, ::step], values[j, ::step], label)
    severity = "error" if error else "warning"
    return Finding(identity, SAMPLES_CHECK, severity, block.name, what, names, (), todo, evidence)  # type: ignore[arg-type]


def _features(block: CheckedBlock) -> list[Finding]:
    families = equal_features(block.measured)
    if not families:
        return []
    groups = [tuple(block.features[k] for k in family) for family in families]
    names = tuple(name for group in groups for name in group)
    examples = "; ".join(" = ".join(f"'{name}'" for name in group[:3]) for group in groups[:3])
    more = sum(len(group) - 1 for group in groups)
    what = (
        f"{counted(more, 'feature')} of block '{block.name}' {'is' if more == 1 else 'are'} equal to another one in "
        f"all samples: {examples}{'' if len(groups) <= 3 else f' and {len(groups) - 3} more'}"
    )
    todo = "keep one of each in the delivered table: copies count twice in every list and give each other's edges"
    identity = finding_id(FEATURES_CHECK, block.name)
    return [Finding(identity, FEATURES_CHECK, "warning", block.name, what, (), names, todo)]


def equal_features(measured: FloatArray) -> list[tuple[int, ...]]:
    """Return families of columns with equal values in all samples (missing in the same ones), as positions.

    A column counts only when chance would hardly give another one the same order of the same values: the
    number of different orders of its values, ``n! / prod(c_v!)``, is over 1000 times the number of pairs.

    >>> counts = np.array([[3.0, 3.0, 0.0], [5.0, 5.0, 0.0], [1.0, 1.0, 0.0], [9.0, 9.0, 1.0]] * 3)
    >>> equal_features(counts + np.arange(12)[:, None] * [1, 1, 0])
    [(0, 1)]
    """
    n, p = measured.shape
    families: dict[bytes, list[int]] = defaultdict(list)
    plain = np.ascontiguousarray(measured.T) + 0.0
    plain[np.isnan(plain)] = np.nan
    for j, column in enumerate(plain):
        families[column.tobytes()].append(j)
    least = np.log(max(1.0, p * (p - 1) / 2) / EQUAL_BY_CHANCE)
    told = [family for family in families.values() if len(family) > 1 and n > 1]
    return [tuple(family) for family in told if _orders(plain[family[0]]) > least]


def _orders(column: FloatArray) -> float:
    """Return the logarithm of the number of different orders of a column's values."""
    counts = np.unique(column, return_counts=True, equal_nan=True)[1]
    return float(gammaln(column.size + 1) - np.sum(gammaln(counts + 1)))


def _constants(block: CheckedBlock) -> list[Finding]:
    """Note features that are missing throughout or have one value wherever they have any."""
    if len(block.samples) < 2:
        return []
    high = np.where(np.isnan(block.measured), -np.inf, block.measured).max(axis=0)
    low = np.where(np.isnan(block.measured), np.inf, block.measured).min(axis=0)
    empty, constant = np.isinf(high), high == low
    flat = np.flatnonzero(empty | constant)
    if not flat.size:
        return []
    names = tuple(block.features[k] for k in flat)
    share = flat.size / len(block.features)
    zeros = int(np.count_nonzero(constant & (high == 0)))
    what = (
        f"{counted(len(names), 'feature')} of block '{block.name}' ({percent(share)}) cannot vary: "
        f"{int(empty.sum())} without any value, {zeros} zero throughout, {len(names) - int(empty.sum()) - zeros} "
        f"with one other value: {some(names)}"
    )
    severity = "warning" if share > MOSTLY and block.values != "counts" else "note"
    todo = "nothing, preparation drops them" + (
        "; but look whether the right table was delivered" if severity == "warning" else ""
    )
    identity = finding_id(CONSTANT_CHECK, block.name)
    return [Finding(identity, CONSTANT_CHECK, severity, block.name, what, (), names, todo)]  # type: ignore[arg-type]
