"""A multi-block PLS on another project's samples: preparation, nuisance, model and cut as they were learnt here."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import (
    ClassOutcome,
    MultiblockDiscriminant,
    MultiblockPLS,
    NumberOutcome,
    fit_residuals,
)
from workbench.engine.performance_measures import class_performance
from workbench.errors import InputError, WorkbenchError
from workbench.intake.faults import counted
from workbench.intake.kinds import column_numbers, present
from workbench.prepare import MeasuredTable, recipe_for
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.applied_shift import shifted_levels
from workbench.workflow.preparing import SEED, smallest_group
from workbench.workflow.state import ProjectState
from workbench.workflow.subjects import subject_design
from workbench.workflow.supervised_fit import fitted_model
from workbench.workflow.supervised_outcome import SupervisedStudy, Units, supervised_study
from workbench.workflow.supervised_source import (
    blocks_of_split,
    predictor_features,
    predictor_values,
    whole_split,
)

FloatArray = NDArray[np.float64]

NORMAL = 1.959964
FEWEST = 3


@dataclass(frozen=True, eq=False)
class AppliedModel:
    """Predictions there, their figures where the outcome is known, the features that are missing or shifted there."""

    predictions: pd.DataFrame
    performance: pd.DataFrame | None
    missing: pd.DataFrame
    shifted: pd.DataFrame
    lines: tuple[str, ...]


def apply_model(
    state: ProjectState,
    view: AnalysisView,
    there: AnalysisView,
    blocks: Sequence[str],
    components: int,
    alike: str,
) -> AppliedModel:
    """Predict the outcome of another project's samples.

    The blocks there go through the preparation learnt from all samples here; nuisance regression, means and scales are
    those learnt here. A nuisance value that is not known there or here counts as the average one, a feature that is not
    there as its mean here; a block that a sample lacks is handled by the model's own rule.

    Parameters
    ----------
    state : ProjectState
        Of the project whose analysis it is.
    view, there : AnalysisView
        The analysis, and the other project's blocks under the names that they have here.
    blocks : sequence of str
        Blocks of the stored model.
    components : int
    alike : {"features", "blocks"}
        Of the stored model, which is fitted again from the same values.

    Raises
    ------
    InputError
        When the outcome is a block, or no sample there can be predicted.
    """
    study = supervised_study(view)
    if study.kind == "block":
        raise InputError(
            f"analysis '{view.name}': its outcome is the block '{study.name}'; predictions for another project are "
            "made for an outcome of the sample sheet"
        )
    split = blocks_of_split(whole_split(study), [study.predictors.index(name) for name in blocks])
    model = fitted_model(study, split, components, alike)
    samples = [
        s for s in map(str, there.sheet.index) if any(s in block.samples for block in there.blocks.values())
    ]
    units, samples = _units_there(study, there, samples)
    nuisance, lines = _nuisance_there(study, there, samples, units)
    parts, absent = [], []
    for name, kept in zip(blocks, split.kept, strict=True):
        values, gone = _block_there(state, study, there, name, samples, units, nuisance)
        parts.append(values[:, kept])
        absent.append(gone[kept])
    x = np.hstack(parts)
    rows: NDArray[np.bool_] = np.asarray(np.isfinite(x).any(axis=1))
    if not rows.any():
        raise InputError(f"analysis '{view.name}': no sample there has a block that the model can use")
    missing, cost = _missing_table(study, blocks, split.kept, absent, model.coef_, model.vip_)
    agreed = agreement(np.hstack(split.train), model.coef_, np.concatenate(absent))
    lines += _missing_lines(missing, cost, agreed, x.shape[1])
    lines += _lacking_lines(blocks, parts, rows)
    shifted, warnings = _shifted(study, blocks, split.kept, absent, parts)
    lines += warnings
    names = tuple(name for name, held in zip(units.names, rows, strict=True) if held)
    truth = _truth(study, there, units, samples)[rows]
    if isinstance(model, MultiblockDiscriminant):
        predictions, performance, said = _classes(study, model, x[rows], names, truth)
    else:
        total = _numbers(study, model, x[rows], nuisance[rows] if nuisance.size else None)
        predictions, performance, said = _number_figures(study, total, names, truth)
    return AppliedModel(predictions, performance, missing, shifted, (*lines, *said))


def _shifted(
    study: SupervisedStudy,
    blocks: Sequence[str],
    kept: Sequence[NDArray[np.intp]],
    absent: Sequence[NDArray[np.bool_]],
    parts: Sequence[FloatArray],
) -> tuple[pd.DataFrame, list[str]]:
    """Features of the model that are there, at levels far from those here."""
    names = [np.array(predictor_features(study, name))[own] for name, own in zip(blocks, kept, strict=True)]
    features = [own[~gone].tolist() for own, gone in zip(names, absent, strict=True)]
    values = [part[:, ~gone] for part, gone in zip(parts, absent, strict=True)]
    return shifted_levels(blocks, features, values, study.n)


def _units_there(study: SupervisedStudy, there: AnalysisView, samples: list[str]) -> tuple[Units, list[str]]:
    """Return what one row is there, at the level of the analysis, and the samples that make the rows."""
    none = np.zeros((0, 0))
    if study.units.level == "samples":
        return Units("samples", tuple(samples), None, None, none), samples
    column = there.study.samples.subject
    if column is None:
        raise InputError(
            f"analysis '{there.name}' looks at {study.units.level} and the other project names no subject column; set "
            "samples.subject there"
        )
    held = set(map(str, present(there.sheet.loc[samples, column]).index))
    samples = [sample for sample in samples if sample in held]
    design = subject_design(there.sheet.loc[samples], there.study, None, "the other project")
    assert design is not None
    if study.units.level == "visits":
        samples = [sample for sample, repeated in zip(samples, design.repeated, strict=True) if repeated]
        design = design.take(np.flatnonzero(design.repeated))
        return Units("visits", tuple(samples), design, design, none), samples
    first = [samples[int(np.flatnonzero(design.subject == s)[0])] for s in range(design.n_subjects)]
    return Units("subjects", tuple(first), design, None, none), samples


def _nuisance_there(
    study: SupervisedStudy, there: AnalysisView, samples: list[str], units: Units
) -> tuple[FloatArray, list[str]]:
    """Nuisance columns of the units there, by the columns here; what is unknown stands at its mean here."""
    shared, lines = study.shared, []
    matrix = np.tile(shared.nuisance.mean(axis=0), (len(samples), 1)) if samples else np.zeros((0, 0))
    sheet = there.sheet.loc[samples]
    here = study.view.sheet.loc[list(shared.samples)]
    for j, name in enumerate(shared.nuisance_names):
        column, mark, level = name.partition("=")
        if column not in sheet or column not in here:
            lines.append(f"nuisance {name}: not in the sample sheet there; every sample counts as average")
            continue
        cells = present(sheet[column])
        if mark:
            known = cells[cells.isin(set(present(here[column])))]
            matrix[[samples.index(str(s)) for s in known.index], j] = (known == level).to_numpy(dtype=float)
            unknown = len(samples) - len(known)
        else:
            numbers = column_numbers(sheet[column])
            found = None if numbers is None else numbers.dropna()
            if found is not None:
                matrix[[samples.index(str(s)) for s in found.index], j] = found.to_numpy(dtype=float)
            unknown = len(samples) - (0 if found is None else len(found))
        if unknown:
            lines.append(
                f"nuisance {name}: {unknown} of {len(samples)} samples have no value that is known here; average"
            )
    return _of_units(units, matrix), lines


def _of_units(units: Units, values: FloatArray) -> FloatArray:
    """Values of the units there from values of their samples."""
    if not values.size:
        return values
    return units.values_of(np.arange(len(units.names)), values)


def _block_there(
    state: ProjectState,
    study: SupervisedStudy,
    there: AnalysisView,
    name: str,
    samples: list[str],
    units: Units,
    nuisance: FloatArray,
) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Standardised values of one block there (NaN rows lack it), and which of its features are not there."""
    features = predictor_features(study, name)
    if name not in there.blocks:
        return np.full((len(units.names), len(features)), np.nan), np.zeros(len(features), dtype=bool)
    here, other = study.view.blocks[name], there.blocks[name]
    table, absent = aligned_table(here.measured, other.measured)
    inside = [sample for sample in samples if sample in set(other.samples)]
    places = {sample: k for k, sample in enumerate(table.samples)}
    recipe = recipe_for(here.layer, here.settings.values, here.settings.prepare)
    smallest = smallest_group(state, here.measured.samples)
    try:
        fitted = recipe.fit(here.measured, smallest_group=smallest, seed=SEED)
        prepared = fitted.transform(table.take([places[sample] for sample in inside]))
    except WorkbenchError as error:
        raise InputError(
            f"block '{name}' there cannot go through the preparation learnt here: {error}"
        ) from error
    column = {feature: k for k, feature in enumerate(prepared.features)}
    values = np.full((len(samples), len(features)), np.nan)
    rows = [samples.index(sample) for sample in inside]
    values[rows] = prepared.values[:, [column[feature] for feature in features]]
    own = study.units.nuisance if study.units.nuisance.size else None
    taught = study.units.values_of(np.arange(study.n), predictor_values(study, name))
    learnt = fit_residuals(own, taught)
    of_units = _of_units(units, values)
    left = learnt.transform(nuisance if own is not None else None, of_units)
    left = np.divide(left, learnt.scale, out=np.zeros_like(left), where=learnt.varies)
    origin = dict(zip(prepared.features, prepared.origins, strict=True))
    gone = np.array([origin[feature] in absent for feature in features])
    left[np.ix_(np.isfinite(of_units).all(axis=1), gone)] = 0.0
    left[~np.isfinite(of_units).all(axis=1)] = np.nan
    return left, gone


def aligned_table(here: MeasuredTable, there: MeasuredTable) -> tuple[MeasuredTable, set[str]]:
    """Return the table there with the features here, empty where it lacks one, and the names of those.

    A text feature is read by the levels here; a level that is unknown here is empty, and a feature that is text in one
    table and numbers in the other is lacking.
    """
    place = {feature: k for k, feature in enumerate(there.features)}
    values = np.full((len(there.samples), len(here.features)), np.nan)
    absent = set()
    for j, (feature, levels) in enumerate(zip(here.features, here.feature_levels, strict=True)):
        k = place.get(feature)
        theirs = None if k is None else there.feature_levels[k]
        if k is None or (levels is None) != (theirs is None):
            absent.add(feature)
            continue
        values[:, j] = there.values[:, k]
        if levels is not None and theirs is not None:
            code = np.array([levels.index(level) if level in levels else np.nan for level in theirs])
            held = np.isfinite(values[:, j])
            values[held, j] = code[values[held, j].astype(int)]
    runs = there.runs
    if here.runs is not None and runs is not None and set(place) >= set(here.features):
        return MeasuredTable(
            values,
            there.samples,
            here.features,
            here.levels,
            runs.with_columns([place[f] for f in here.features]),
        ), absent
    return MeasuredTable(values, there.samples, here.features, here.levels, runs), absent


def _missing_table(
    study: SupervisedStudy,
    blocks: Sequence[str],
    kept: tuple[NDArray[np.intp], ...],
    absent: list[NDArray[np.bool_]],
    coefficients: FloatArray,
    vip: FloatArray,
) -> tuple[pd.DataFrame, float]:
    """Features of the model that are not there, the weightiest first, and their share of the squared coefficients."""
    rows, start = [], 0
    squares = (coefficients**2).sum(axis=0)
    share = squares / squares.sum() if squares.sum() > 0.0 else squares
    for name, inside, gone in zip(blocks, kept, absent, strict=True):
        features = predictor_features(study, name)
        for k in np.flatnonzero(gone):
            rows.append((features[inside[k]], name, share[start + k], vip[start + k]))
        start += inside.size
    table = pd.DataFrame(rows, columns=["feature", "block", "share", "vip"])
    table = table.sort_values("share", ascending=False, kind="stable", ignore_index=True)
    return table, float(table["share"].sum())


def agreement(x: FloatArray, coefficients: FloatArray, gone: NDArray[np.bool_]) -> float:
    """Correlation, over the samples here, of the model's values without some features with its values with all."""
    whole = x @ coefficients.T
    without = x[:, ~gone] @ coefficients[:, ~gone].T
    if not gone.any() or without.std() == 0.0:
        return 0.0 if gone.any() else 1.0
    return float(np.corrcoef(whole.ravel(), without.ravel())[0, 1])


def _missing_lines(missing: pd.DataFrame, cost: float, agreed: float, total: int) -> list[str]:
    if missing.empty:
        return [f"all {total:,} features of the model are there"]
    named = ", ".join(f"{row.feature} ({row.block})" for row in missing.head(5).itertuples())
    named += ", ..." if len(missing) > 5 else ""
    return [
        f"not there: {counted(len(missing), 'feature')} of the model's {total:,} ({named}), with {cost:.0%} of its "
        "squared coefficients; each counts as its mean here, which draws predictions to the middle. Over the samples "
        f"here the model's values without them go with those with all at r = {agreed:.2f}"
    ]


def _lacking_lines(blocks: Sequence[str], parts: list[FloatArray], rows: NDArray[np.bool_]) -> list[str]:
    lines = []
    for name, values in zip(blocks, parts, strict=True):
        lacking = int(np.isnan(values[rows]).all(axis=1).sum())
        if lacking:
            lines.append(
                f"{lacking} of {int(rows.sum())} lack block {name}: predicted by the model of the other blocks"
            )
    return lines


def _truth(study: SupervisedStudy, there: AnalysisView, units: Units, samples: list[str]) -> FloatArray:
    """Outcome there: class from 0 or number; NaN where it is not known."""
    if study.name not in there.sheet:
        return np.full(len(units.names), np.nan)
    series = there.sheet.loc[samples, study.name]
    cells = present(series)
    if isinstance(study.outcome, ClassOutcome):
        known = {level: float(g) for g, level in enumerate(study.levels)}
        by_sample = {str(sample): known.get(str(cell), np.nan) for sample, cell in cells.items()}
        wanted = units.names if units.level == "subjects" else samples
        return np.array([by_sample.get(sample, np.nan) for sample in wanted])
    numbers = column_numbers(series)
    if numbers is None:
        return np.full(len(units.names), np.nan)
    return _of_units(units, numbers.to_numpy(dtype=np.float64)[:, None])[:, 0]


def _classes(
    study: SupervisedStudy,
    model: MultiblockDiscriminant,
    x: FloatArray,
    names: tuple[str, ...],
    truth: FloatArray,
) -> tuple[pd.DataFrame, pd.DataFrame | None, list[str]]:
    shares, chosen = model.predict_proba(x), np.asarray(model.predict(x), dtype=np.intp)
    table = pd.DataFrame({"sample": names, "predicted": [study.levels[g] for g in chosen]})
    for g, level in enumerate(study.levels):
        table[f"probability {level}"] = shares[:, g]
    known = np.isfinite(truth)
    table[study.name] = [study.levels[int(t)] if k else "" for t, k in zip(truth, known, strict=True)]
    labels = truth[known].astype(np.intp)
    counts = np.bincount(labels, minlength=len(study.levels))
    if counts.min() < FEWEST:
        return (
            table,
            None,
            [f"no figures: a class has {counted(int(counts.min()), 'sample')} there, {FEWEST} are the least"],
        )
    scores = np.asarray(model.decision_function(x)).reshape(len(x), -1)[known]
    figures = class_performance(labels, scores[None], chosen[known][None], shares[known][None])
    recognised = np.diag(figures.confusion) / counts
    # A share of 0 or 1 is not known for certain: Agresti & Coull's two added of each kind.
    smoothed = (np.diag(figures.confusion) + 2.0) / (counts + 4.0)
    error = float(np.sqrt((smoothed * (1.0 - smoothed) / (counts + 4.0)).sum()) / counts.size)
    rows = [
        ("balanced_accuracy", recognised.mean(), *_interval(float(recognised.mean()), error)),
        ("auc", figures.auc[0], *_interval(float(figures.auc[0]), figures.auc_error)),
        ("brier", figures.brier[0], np.nan, np.nan),
        *(
            (f"recognised {level}", r, np.nan, np.nan)
            for level, r in zip(study.levels, recognised, strict=True)
        ),
    ]
    performance = pd.DataFrame(rows, columns=["measure", "value", "low", "high"]).assign(n=labels.size)
    first, second = rows[0], rows[1]
    said = (
        f"there, on {counted(labels.size, 'sample')}: balanced accuracy {first[1]:.2f} (95 % {first[2]:.2f} to "
        f"{first[3]:.2f}), AUC {second[1]:.2f} ({second[2]:.2f} to {second[3]:.2f})"
    )
    return table, performance, [said]


def _numbers(
    study: SupervisedStudy,
    model: MultiblockPLS | MultiblockDiscriminant,
    x: FloatArray,
    nuisance: FloatArray | None,
) -> FloatArray:
    """Predicted numbers in their unit: what the nuisance says by the regression here, and the model."""
    assert isinstance(study.outcome, NumberOutcome)
    predicted = np.asarray(model.predict(x)).reshape(len(x), -1)
    own = study.units.nuisance if study.units.nuisance.size else None
    learnt = fit_residuals(own, study.outcome.values[:, :, 0])
    of_nuisance = -learnt.transform(nuisance if own is not None else None, np.zeros_like(predicted))
    total: FloatArray = (predicted + of_nuisance)[:, 0] * study.deviations[0] + study.means[0]
    return total


def _number_figures(
    study: SupervisedStudy, predicted: FloatArray, names: tuple[str, ...], truth: FloatArray
) -> tuple[pd.DataFrame, pd.DataFrame | None, list[str]]:
    table = pd.DataFrame({"sample": names, "predicted": predicted, study.name: truth})
    known = np.isfinite(truth)
    n = int(known.sum())
    if n < FEWEST + 1 or truth[known].std() == 0.0:
        return (
            table,
            None,
            [f"no figures: {counted(n, 'sample')} with a known outcome there, or it does not vary"],
        )
    errors = truth[known] - predicted[known]
    r = float(np.corrcoef(truth[known], predicted[known])[0, 1]) if predicted[known].std() > 0.0 else 0.0
    low, high = np.tanh(
        np.arctanh(np.clip(r, -0.999999, 0.999999)) + np.array([-1.0, 1.0]) * NORMAL / np.sqrt(n - 3)
    )
    share = 1.0 - float((errors**2).sum() / ((truth[known] - truth[known].mean()) ** 2).sum())
    rows = [
        ("q2", share, np.nan, np.nan),
        ("correlation", r, low, high),
        ("rmse (units of the outcome)", float(np.sqrt((errors**2).mean())), np.nan, np.nan),
        ("mean absolute error", float(np.abs(errors).mean()), np.nan, np.nan),
        (
            "bias (observed less predicted)",
            float(errors.mean()),
            *_interval(float(errors.mean()), float(errors.std(ddof=1) / np.sqrt(n)), None),
        ),
    ]
    performance = pd.DataFrame(rows, columns=["measure", "value", "low", "high"]).assign(n=n)
    said = (
        f"there, on {counted(n, 'sample')}: correlation with the truth {r:.2f} (95 % {low:.2f} to {high:.2f}), Q2 "
        f"{share:.2f}, mean absolute error {np.abs(errors).mean():.3g}, bias {errors.mean():+.3g} (observed less "
        "predicted)"
    )
    return table, performance, [said]


def _interval(value: float, error: float, most: float | None = 1.0) -> tuple[float, float]:
    low, high = value - NORMAL * error, value + NORMAL * error
    return (low, high) if most is None else (max(0.0, low), min(most, high))
