"""What pools, blanks and repeated runs show about an assay (blocks with a run sheet)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata
from scipy.stats import t as student

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.evidence import FeatureShares, RunFigures
from workbench.checks.finding import Finding, Severity, accept_line, adjust_line, finding_id
from workbench.checks.words import number_of, percent, some
from workbench.engine.multiple import benjamini_hochberg
from workbench.intake.faults import counted
from workbench.prepare.drift import FEWEST_POOLS as FEWEST_POOLS_TO_CORRECT

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

SCATTER, MUCH_SCATTER = 0.30, 1.0 / 3.0
CARRIED, MUCH_CARRIED = 0.30, 0.20
FEWEST_POOLS, FEWEST_FOR_DRIFT = 3, 5
DRIFT_LEVEL, DRIFT_CHANGE, MUCH_DRIFT = 0.05, 0.5, 0.10
FEWEST_COMMON = 10
APART = 1.0


@dataclass(frozen=True, eq=False)
class Runs:
    """Runs of one block: values (zero and missing as NaN for counts and intensities) and their logarithms.

    ``logs`` are base 2 where values are counts or intensities, else the values themselves; ``levelled`` have
    each run's own level (median difference from the features' medians) taken out.
    """

    names: tuple[str, ...]
    sample: tuple[str, ...]
    role: NDArray[np.str_]
    order: FloatArray
    values: FloatArray
    logs: FloatArray
    levelled: FloatArray
    on_a_scale: bool

    def of(self, role: str) -> IndexArray:
        """Return the rows of one role."""
        return np.flatnonzero(self.role == role)


def check_runs(data: StudyData) -> list[Finding]:
    """Find runs without a sample, pools that scatter or drift, blanks that carry signal, repeats that disagree."""
    found = []
    for block in data.blocks.values():
        runs = runs_of(block)
        if runs is not None:
            found += _orphans(block, runs) + _scatter(block, runs) + _drift(block, runs)
            found += _blanks(block, runs) + _repeats(block, runs)
    return found


def runs_of(block: CheckedBlock) -> Runs | None:
    """Return the runs of a block, None without a run sheet."""
    if block.runs is None or block.run_values is None:
        return None
    sheet, values = block.runs, block.run_values.copy()
    on_a_scale = block.values in ("counts", "intensities")
    if on_a_scale:
        values[~(values > 0)] = np.nan
    logs = np.log2(values) if on_a_scale else values
    order = np.full(len(sheet), np.nan)
    if "order" in sheet:
        order = sheet["order"].to_numpy(dtype=np.float64)
    return Runs(
        names=tuple(map(str, sheet.index)),
        sample=tuple("" if cell is None or cell != cell else str(cell) for cell in sheet["sample"])
        if "sample" in sheet
        else ("",) * len(sheet),
        role=np.array([str(role) for role in sheet["role"]], dtype=str),
        order=order,
        values=values,
        logs=logs,
        levelled=_levelled(logs),
        on_a_scale=on_a_scale,
    )


def _levelled(logs: FloatArray) -> FloatArray:
    """Return logarithms without each run's own level."""
    common = (~np.isnan(logs)).mean(axis=0) >= 0.5
    if common.sum() < FEWEST_COMMON:
        return logs
    away = logs[:, common] - np.nanmedian(logs[:, common], axis=0)
    level = np.zeros(len(logs))
    held = ~np.isnan(away).all(axis=1)
    level[held] = np.nanmedian(away[held], axis=1)
    return logs - level[:, None]


def _finding(
    block: CheckedBlock, check: str, severity: Severity, what: str, todo: str, evidence: object = None,
    features: tuple[str, ...] = (), samples: tuple[str, ...] = (),
) -> Finding:  # fmt: skip
    identity = finding_id(check, block.name)
    if severity == "warning":
        todo += f"; or keep it with {accept_line(identity)}"
    return Finding(identity, check, severity, block.name, what, samples, features, todo, evidence)


def _orphans(block: CheckedBlock, runs: Runs) -> list[Finding]:
    known = {*block.samples, *block.settings.exclude}
    lost = [runs.names[k] for k in runs.of("sample") if runs.sample[k] not in known or not runs.sample[k]]
    lost = [name for name in lost if runs.sample[runs.names.index(name)] not in block.columns.index]
    if not lost:
        return []
    what = (
        f"{number_of(lost, 'run')} of block '{block.name}' belong to no sample of the sheet and are left out"
    )
    todo = "name their sample in the run sheet, or nothing if they are of no use"
    return [_finding(block, "runs_without_sample", "note", what, todo)]


def _scatter(block: CheckedBlock, runs: Runs) -> list[Finding]:
    pools = runs.of("pool")
    if not runs.on_a_scale or pools.size == 0:
        return []
    if pools.size < FEWEST_POOLS:
        what = f"block '{block.name}' has {counted(pools.size, 'pool')}: too few to tell drift and scatter from chance"
        return [
            _finding(block, "few_pools", "note", what, "nothing now; run a pool every ten samples next time")
        ]
    rsd = relative_spread(runs.levelled[pools])
    known = ~np.isnan(rsd)
    scattering = np.flatnonzero(known & (np.nan_to_num(rsd) > SCATTER))
    if not known.any() or not scattering.size:
        return []
    share = scattering.size / int(known.sum())
    severity: Severity = "warning" if share > MUCH_SCATTER else "note"
    names = tuple(block.features[j] for j in scattering)
    what = (
        f"pools of block '{block.name}' scatter by more than {percent(SCATTER)} in {counted(len(names), 'feature')} of "
        f"{int(known.sum())} ({percent(share)}); the median relative standard deviation is "
        f"{percent(float(np.median(rsd[known])))}"
    )
    todo = "preparation drops these features; with so many, ask what happened in the run"
    evidence = FeatureShares(rsd[known], SCATTER, "relative standard deviation in pools")
    return [_finding(block, "pools_scatter", severity, what, todo, evidence, names)]


def relative_spread(logs: FloatArray) -> FloatArray:
    """Return the relative standard deviation of each feature from base-2 logarithms of at least three runs.

    ``sqrt(exp(s^2) - 1)`` with ``s`` the standard deviation of the natural logarithms; NaN with fewer than
    three values.
    """
    enough = (~np.isnan(logs)).sum(axis=0) >= FEWEST_POOLS
    spread = np.full(logs.shape[1], np.nan)
    spread[enough] = np.sqrt(np.expm1((np.log(2.0) * np.nanstd(logs[:, enough], axis=0, ddof=1)) ** 2))
    return spread


def _drift(block: CheckedBlock, runs: Runs) -> list[Finding]:
    pools = runs.of("pool")
    pools = pools[~np.isnan(runs.order[pools])]
    if not runs.on_a_scale or pools.size < FEWEST_FOR_DRIFT:
        return []
    change, q = trends(runs.logs[pools], runs.order[pools])
    drifting = np.flatnonzero(
        (np.nan_to_num(q, nan=1.0) <= DRIFT_LEVEL) & (np.abs(np.nan_to_num(change)) >= DRIFT_CHANGE)
    )
    known = int(np.count_nonzero(~np.isnan(q)))
    if not drifting.size:
        return []
    share = drifting.size / known
    names = tuple(block.features[j] for j in drifting)
    typical = float(np.median(np.abs(change[drifting])))
    what = (
        f"{counted(len(names), 'feature')} of {known} drift over the run order in the pools of block '{block.name}' "
        f"({percent(share)}), by {typical:.1f} doublings from first to last pool"
    )
    shown = runs.of("pool")
    level = np.nanmean(runs.logs[shown][:, drifting], axis=1) if drifting.size else np.empty(0)
    evidence = RunFigures(
        runs.order[shown], level, ("pool",) * shown.size, "mean log2 of the drifting features"
    )
    corrected = pools.size >= FEWEST_POOLS_TO_CORRECT or "order" in block.adjust
    severity: Severity = "warning" if share > MUCH_DRIFT and not corrected else "note"
    todo = "nothing, preparation corrects it by the pools; `workbench prepare --explain` tells how"
    if not corrected:
        todo = (
            f"{pools.size} pools are too few to correct it by; adjust for the order: "
            f"{adjust_line(block.name, [*block.settings.adjust, 'order'])}"
        )
    return [_finding(block, "drift", severity, what, todo, evidence, names)]


def trends(logs: FloatArray, order: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the change of each feature from first to last run, and the q of its rank correlation with the order.

    Features with fewer than five values have NaN in both.
    """
    p, change = np.full(logs.shape[1], np.nan), np.full(logs.shape[1], np.nan)
    for j in range(logs.shape[1]):
        held = ~np.isnan(logs[:, j])
        n = int(held.sum())
        if n < FEWEST_FOR_DRIFT or np.ptp(logs[held, j]) == 0 or np.ptp(order[held]) == 0:
            continue
        r = np.corrcoef(rankdata(logs[held, j]), rankdata(order[held]))[0, 1]
        p[j] = 2 * student.sf(abs(r) * np.sqrt((n - 2) / max(1 - r**2, 1e-12)), n - 2)
        slope = np.polyfit(order[held], logs[held, j], 1)[0]
        change[j] = slope * np.ptp(order)
    return change, benjamini_hochberg(p)


def _blanks(block: CheckedBlock, runs: Runs) -> list[Finding]:
    blanks, samples = runs.of("blank"), runs.of("sample")
    if not runs.on_a_scale or blanks.size == 0 or samples.size == 0:
        return []
    carried = _median(np.nan_to_num(runs.values[blanks])) / _positive(
        _median(np.nan_to_num(runs.values[samples]))
    )
    known = ~np.isnan(carried)
    high = np.flatnonzero(np.nan_to_num(carried) >= CARRIED)
    if not known.any() or not high.size:
        return []
    share = high.size / int(known.sum())
    names = tuple(block.features[j] for j in high)
    what = (
        f"blanks of block '{block.name}' carry at least {percent(CARRIED)} of the samples' signal in "
        f"{counted(len(names), 'feature')} of {int(known.sum())} ({percent(share)}), such as {some(names[:3])}"
    )
    todo = "preparation drops features that blanks explain; with so many, look for carry-over or a blank that is none"
    severity: Severity = "warning" if share > MUCH_CARRIED else "note"
    evidence = FeatureShares(
        np.minimum(carried[known], 2.0), CARRIED, "median of blanks over median of samples (at most 2)"
    )
    return [_finding(block, "blanks_carry", severity, what, todo, evidence, names)]


def _median(values: FloatArray) -> FloatArray:
    return np.asarray(np.median(values, axis=0), dtype=np.float64)


def _positive(values: FloatArray) -> FloatArray:
    return np.where(values > 0, values, np.nan)


def _repeats(block: CheckedBlock, runs: Runs) -> list[Finding]:
    """Find runs of one sample that are no closer to each other than two samples are."""
    rows = np.array([k for k in runs.of("sample") if runs.sample[k]], dtype=np.intp)
    names = [runs.sample[k] for k in rows]
    repeated = sorted({name for name in names if names.count(name) > 1})
    common = (~np.isnan(runs.levelled[rows])).mean(axis=0) >= 0.8 if rows.size else np.empty(0, bool)
    if not repeated or len(set(names)) < 3 or common.sum() < FEWEST_COMMON:
        return []
    values = runs.levelled[np.ix_(rows, np.flatnonzero(common))]
    centred = np.nan_to_num(values - np.nanmean(values, axis=0))
    squared = _distances(centred)
    same = np.array(names)[:, None] == np.array(names)
    between = float(np.median(squared[~same]))
    odd = tuple(name for name in repeated if _inner(squared, np.array(names) == name) >= APART * between)
    if not odd:
        return []
    what = (
        f"the runs of {number_of(odd, 'sample')} of block '{block.name}' are as far from each other as those of "
        "different samples"
    )
    todo = "look for a mix-up in the run sheet, or take the wrong run out of it"
    return [_finding(block, "repeats_disagree", "warning", what, todo, samples=odd)]


def _distances(centred: FloatArray) -> FloatArray:
    kernel = centred @ centred.T
    lengths = np.diag(kernel)
    return np.maximum(lengths[:, None] + lengths - 2.0 * kernel, 0.0)


def _inner(squared: FloatArray, member: NDArray[np.bool_]) -> float:
    inside = squared[np.ix_(member, member)]
    return float(np.median(inside[np.triu_indices(len(inside), 1)]))
