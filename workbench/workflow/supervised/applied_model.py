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
    fit_residuals,
)
from workbench.errors import InputError, WorkbenchError
from workbench.intake.kinds import column_numbers, present
from workbench.prepare import MeasuredTable, recipe_for
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.entry.preparing import SEED, smallest_group
from workbench.workflow.state import ProjectState
from workbench.workflow.subjects import subject_design
from workbench.workflow.supervised.applied_missing import (
    agreement,
    missing_lines,
    missing_table,
    shifted_features,
)
from workbench.workflow.supervised.applied_performance import class_figures, number_figures, predicted_numbers
from workbench.workflow.supervised.supervised_fit import fitted_model
from workbench.workflow.supervised.supervised_outcome import SupervisedStudy, Units, supervised_study
from workbench.workflow.supervised.supervised_source import (
    blocks_of_split,
    predictor_features,
    predictor_values,
    whole_split,
)

FloatArray = NDArray[np.float64]


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
    missing, cost = missing_table(study, blocks, split.kept, absent, model.coef_, model.vip_)
    agreed = agreement(np.hstack(split.train), model.coef_, np.concatenate(absent))
    lines += missing_lines(missing, cost, agreed, x.shape[1])
    lines += _lacking_lines(blocks, parts, rows)
    shifted, warnings = shifted_features(study, blocks, split.kept, absent, parts)
    lines += warnings
    names = tuple(name for name, held in zip(units.names, rows, strict=True) if held)
    truth = _truth(study, there, units, samples)[rows]
    if isinstance(model, MultiblockDiscriminant):
        predictions, performance, said = class_figures(study, model, x[rows], names, truth)
    else:
        total = predicted_numbers(study, model, x[rows], nuisance[rows] if nuisance.size else None)
        predictions, performance, said = number_figures(study, total, names, truth)
    return AppliedModel(predictions, performance, missing, shifted, (*lines, *said))


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
