"""What multi-block PLS explains: a column of the sample sheet or a block, read so that nothing of it is a predictor."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import ClassOutcome, NumberOutcome, SubjectDesign, aliased, centred, subject_means
from workbench.errors import InputError
from workbench.intake import group_codes
from workbench.intake.kinds import column_kind, column_numbers, present
from workbench.workflow.analysis_view import AnalysisView, Shared

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

SAME = 1.0 - 1e-9
"""A predictor whose correlation with the outcome is this large is the outcome under another name."""

LEAST_OF_A_CLASS = 2


@dataclass(frozen=True, eq=False)
class SupervisedStudy:
    """Samples, predictors and outcome of a supervised analysis.

    Attributes
    ----------
    view : AnalysisView
    shared : Shared
        Samples with all blocks, a design and an outcome.
    predictors : tuple of str
        Blocks that predict.
    excluded : dict of str to tuple of str
        For each block its features that are the outcome itself, and so do not predict.
    kind : {"classes", "number", "block"}
    name : str
        The outcome's column or block.
    levels : tuple of str
        Classes in order; the outcome's name; or the features of the block.
    outcome : ClassOutcome or NumberOutcome
        Of the units: samples, or subjects.
    means, deviations : ndarray of shape (n_outcomes,)
        Of numbers, to turn standard deviations back into units; empty for classes.
    units : Units
    left_out : dict of str to str
        Sample and the reason, for what is left out because of the outcome or the level.
    """

    view: AnalysisView
    shared: Shared
    predictors: tuple[str, ...]
    excluded: dict[str, tuple[str, ...]]
    kind: str
    name: str
    levels: tuple[str, ...]
    outcome: ClassOutcome | NumberOutcome
    means: FloatArray
    deviations: FloatArray
    units: Units
    left_out: dict[str, str]

    @property
    def n(self) -> int:
        """Number of units that are predicted: samples, or subjects."""
        return len(self.units.names)


@dataclass(frozen=True, eq=False)
class Units:
    """What one row of the analysis is: a sample, a sample less its subject's mean, or a subject.

    Attributes
    ----------
    level : {"samples", "visits", "subjects"}
    names : tuple of str
        Samples or subjects.
    design : SubjectDesign or None
        Over the samples (level "subjects": before taking means).
    folds : SubjectDesign or None
        Over the units: what stays together in a fold.
    nuisance : ndarray of shape (n_units, n_columns)
    """

    level: str
    names: tuple[str, ...]
    design: SubjectDesign | None
    folds: SubjectDesign | None
    nuisance: FloatArray

    def samples_of(self, units: IndexArray) -> IndexArray:
        """Rows of the samples that make some units, in the order of the samples."""
        if self.level != "subjects" or self.design is None:
            return units
        return np.flatnonzero(np.isin(self.design.subject, units))

    def values_of(self, units: IndexArray, values: FloatArray) -> FloatArray:
        """Values of units from values of :meth:`samples_of`."""
        if self.design is None or self.level == "samples":
            return values
        part = self.design.take(self.samples_of(units))
        if self.level == "visits":
            return centred(part, values)
        means = subject_means(part, values)
        return means[np.searchsorted(np.unique(units), units)]


def supervised_study(view: AnalysisView) -> SupervisedStudy:
    """Read the outcome of an analysis and settle which samples and features predict it.

    Raises
    ------
    InputError
        When the outcome could be classes or a number and nobody said which, is adjusted for, cannot be told
        from the nuisance, has too few samples of a class, or no block is left to predict it.
    """
    outcome = str(view.settings.outcome)
    if outcome in view.study.blocks:
        return _of_block(view, outcome)
    where = f"analysis '{view.name}', outcome '{outcome}'"
    _require_no_nuisance(view, outcome, where)
    kind = outcome_kind(view, outcome)
    every = view.shared(list(view.blocks))
    kept, left_out = _with_outcome(view, every, outcome, kind)
    shared = _part(every, kept)
    if kind == "classes":
        groups = group_codes(view.sheet.loc[list(shared.samples)], outcome, view.study.samples.order)
        values, levels = groups.codes.astype(np.float64)[:, None], groups.levels
    else:
        numbers = column_numbers(view.sheet.loc[list(shared.samples), outcome])
        assert numbers is not None
        values, levels = numbers.to_numpy(dtype=np.float64)[:, None], (outcome,)
    study = _assembled(view, shared, tuple(view.blocks), kind, outcome, levels, values, left_out, where)
    return replace(study, excluded=_excluded(view, shared, outcome, values, kind))


def outcome_kind(view: AnalysisView, outcome: str) -> str:
    """Return ``classes`` or ``number``; refuse a column that could be either until someone says which."""
    said = view.settings.outcome_kind
    series = view.sheet[outcome]
    if said == "number" and column_numbers(series) is None:
        raise InputError(
            f"analysis '{view.name}': outcome_kind = \"number\", but column '{outcome}' has cells that are no "
            'numbers; mend them, or set outcome_kind = "classes"'
        )
    if said is not None:
        return said
    if outcome in view.study.samples.group:
        return "classes"
    kind = column_kind(series)
    if kind == "unclear":
        different = sorted(set(present(series)), key=float)
        raise InputError(
            f"analysis '{view.name}': outcome '{outcome}' holds the whole numbers {', '.join(different)}, which may "
            'be classes or a number; say which with outcome_kind = "classes" or outcome_kind = "number" under '
            f"[analyses.{view.name}] in project.toml"
        )
    return kind


def _of_block(view: AnalysisView, outcome: str) -> SupervisedStudy:
    """Another layer as outcome: its blocks never predict, nor do others of its layer."""
    where = f"analysis '{view.name}', outcome '{outcome}'"
    if outcome not in view.blocks:
        raise InputError(
            f"{where}: the block is not among the analysis's blocks; add it to blocks in project.toml"
        )
    layer = view.blocks[outcome].layer
    predictors = tuple(name for name, block in view.blocks.items() if block.layer != layer)
    if not predictors:
        raise InputError(f"{where}: no block of another layer is left to predict it; add one")
    shared = view.shared([*predictors, outcome])
    block = view.blocks[outcome]
    values = block.values[block.rows(shared.samples)]
    varies = values.std(axis=0) > 0.0
    levels = tuple(name for name, held in zip(block.features, varies, strict=True) if held)
    return _assembled(view, shared, predictors, "block", outcome, levels, values[:, varies], {}, where)


def _assembled(
    view: AnalysisView,
    shared: Shared,
    predictors: tuple[str, ...],
    kind: str,
    name: str,
    levels: tuple[str, ...],
    values: FloatArray,
    left_out: dict[str, str],
    where: str,
) -> SupervisedStudy:
    shared, values, dropped = _with_level(shared, values, view.settings.level)
    units, of_units = _units(shared, values, kind, view.settings.level, where)
    means, deviations = np.zeros(0), np.zeros(0)
    if kind == "classes":
        codes = of_units[:, 0].astype(np.intp)
        _require_classes(codes, levels, where)
        _require_untangled(units.nuisance, shared.nuisance_names, codes, levels, name, where)
        outcome: ClassOutcome | NumberOutcome = ClassOutcome.of(codes)
    else:
        means, deviations = of_units.mean(axis=0), of_units.std(axis=0, ddof=1)
        if not (deviations > 0.0).all():
            raise InputError(
                f"{where}: it does not vary over the {len(of_units)} samples; nothing can predict it"
            )
        outcome = NumberOutcome.of(_coordinates(of_units), units.nuisance if units.nuisance.size else None)
    return SupervisedStudy(
        view,
        shared,
        predictors,
        {},
        kind,
        name,
        levels,
        outcome,
        means,
        deviations,
        units,
        left_out | dict.fromkeys(dropped, f"its subject has one sample, and {where} asks for changes"),
    )


def _coordinates(values: FloatArray) -> FloatArray:
    """More outcomes than samples, as coordinates: standardised, turned, the same squared errors."""
    if values.shape[1] <= values.shape[0]:
        return values
    scaled = (values - values.mean(axis=0)) / values.std(axis=0, ddof=1)
    u, lengths, _ = np.linalg.svd(scaled, full_matrices=False)
    kept = lengths > 1e-6 * lengths[0]
    turned: FloatArray = u[:, kept] * lengths[kept]
    return turned


def _with_level(
    shared: Shared, values: FloatArray, level: str | None
) -> tuple[Shared, FloatArray, list[str]]:
    """For changes, leave out the subjects that have one sample."""
    design = shared.subjects
    if level != "visits" or design is None or design.kind == "single":
        return shared, values, []
    kept = np.flatnonzero(design.repeated)
    dropped = [sample for sample, held in zip(shared.samples, design.repeated, strict=True) if not held]
    return _part(shared, kept), values[kept], dropped


def _units(
    shared: Shared, values: FloatArray, kind: str, level: str | None, where: str
) -> tuple[Units, FloatArray]:
    design = shared.subjects
    if design is None or design.kind == "single" or level is None:
        return Units("samples", shared.samples, None, None, shared.nuisance), values
    constant = np.array(
        [len(np.unique(values[design.subject == s], axis=0)) == 1 for s in range(design.n_subjects)]
    )
    if level == "subjects":
        if kind == "classes" and not constant.all():
            raise InputError(
                f"{where}: it changes within subjects ({np.count_nonzero(~constant)} of {constant.size}), so that a "
                'subject has no one class; ask with level = "visits", or name an outcome of the subject'
            )
        first = [shared.samples[np.flatnonzero(design.subject == s)[0]] for s in range(design.n_subjects)]
        means = subject_means(design, values)
        nuisance = subject_means(design, shared.nuisance)
        return Units("subjects", tuple(first), design, None, nuisance), means
    if constant.all():
        raise InputError(
            f'{where}: it is the same in all samples of a subject, so that changes within subjects (level = "visits") '
            'say nothing about it; ask with level = "subjects"'
        )
    nuisance = centred(design, shared.nuisance) if shared.nuisance.size else shared.nuisance
    changes = values if kind == "classes" else centred(design, values)
    return Units("visits", shared.samples, design, design, nuisance), changes


def _with_outcome(
    view: AnalysisView, shared: Shared, outcome: str, kind: str
) -> tuple[IndexArray, dict[str, str]]:
    held = set(map(str, present(view.sheet[outcome]).index))
    kept = np.array([k for k, sample in enumerate(shared.samples) if sample in held], dtype=np.intp)
    left_out = {sample: f"no value in column '{outcome}'" for sample in shared.samples if sample not in held}
    if kept.size < 2 * LEAST_OF_A_CLASS:
        raise InputError(
            f"analysis '{view.name}': {kept.size} of {shared.n} samples have an outcome in column '{outcome}' "
            f"({kind}); fill the cells, or name another outcome"
        )
    return kept, left_out


def _part(shared: Shared, kept: IndexArray) -> Shared:
    groups = shared.groups
    return replace(
        shared,
        samples=tuple(shared.samples[k] for k in kept),
        nuisance=shared.nuisance[kept],
        groups=None if groups is None else replace(groups, codes=groups.codes[kept]),
        group_columns=shared.group_columns[kept],
        subjects=None if shared.subjects is None else shared.subjects.take(kept),
    )


def _require_no_nuisance(view: AnalysisView, outcome: str, where: str) -> None:
    adjusted = {
        *view.study.samples.adjust,
        *(c for block in view.blocks.values() for c in block.settings.adjust),
    }
    if outcome in adjusted:
        raise InputError(
            f"{where}: the column is adjusted for, which takes it out of every block; remove it from adjust, or name "
            "another outcome"
        )


def _require_classes(codes: IndexArray, levels: Sequence[str], where: str) -> None:
    counts = np.bincount(codes, minlength=len(levels))
    if len(levels) < 2:
        raise InputError(f"{where}: all {codes.size} samples are '{levels[0]}'; two classes are the least")
    few = [
        f"'{level}' has {count}"
        for level, count in zip(levels, counts, strict=True)
        if count < LEAST_OF_A_CLASS
    ]
    if few:
        raise InputError(
            f"{where}: {', '.join(few)} of {codes.size} samples; {LEAST_OF_A_CLASS} of each class are the least. Add "
            "samples, or leave the class out (samples.exclude)"
        )


def _require_untangled(
    nuisance: FloatArray,
    names: Sequence[str],
    codes: IndexArray,
    levels: Sequence[str],
    name: str,
    where: str,
) -> None:
    """Stop where the classes are a combination of nuisance columns, with the equation in words."""
    for g in range(1, len(levels)):
        belongs = (codes == g).astype(np.float64)
        if nuisance.shape[1] and aliased(np.column_stack([nuisance, belongs]), [*names, "the outcome"])[
            -1:
        ] == ("the outcome",):
            raise InputError(
                f"{where}: {_equation(nuisance, names, belongs, f'{name}={levels[g]}')} in all {codes.size} samples, "
                "so that removing the one removes the other: no method can tell them apart. Only samples of another "
                "design can; or take the column out of adjust, and know that whatever predicts the outcome may be it"
            )


def _equation(nuisance: FloatArray, names: Sequence[str], target: FloatArray, what: str) -> str:
    """Return ``what`` as the sum of nuisance columns that it is."""
    left = np.column_stack([np.ones(len(target)), nuisance])
    solved = np.linalg.lstsq(left, target, rcond=None)[0]
    terms = [] if abs(solved[0]) < 1e-8 else [f"{solved[0]:.4g}"]
    for value, name in zip(solved[1:], names, strict=True):
        if abs(value) < 1e-8:
            continue
        size = "" if abs(abs(value) - 1.0) < 1e-8 else f"{abs(value):.4g} x "
        terms.append(f"{'- ' if value < 0 else '+ ' if terms else ''}{size}({name})")
    return f"({what}) = {' '.join(terms) or '0'}"


def _excluded(
    view: AnalysisView, shared: Shared, outcome: str, values: FloatArray, kind: str
) -> dict[str, tuple[str, ...]]:
    """Features that carry the outcome's name, or are the outcome under another one."""
    wanted = _plain(outcome)
    target = values[:, 0] - values[:, 0].mean()
    found = {}
    for name, block in view.blocks.items():
        origins = block.annotations["origin"] if "origin" in block.annotations else pd.Series(block.features)
        named = [
            _plain(feature.partition("=")[0]) == wanted or _plain(str(origin)) == wanted
            for feature, origin in zip(block.features, origins, strict=True)
        ]
        x = block.values[block.rows(shared.samples)]
        x = x - x.mean(axis=0)
        lengths = np.linalg.norm(x, axis=0) * np.linalg.norm(target)
        r = np.divide(np.abs(target @ x), lengths, out=np.zeros(x.shape[1]), where=lengths > 0.0)
        same = (
            (r >= SAME)
            if kind != "classes" or len(np.unique(values)) == 2
            else np.zeros(x.shape[1], dtype=bool)
        )
        gone = np.asarray(named) | same
        if gone.any():
            found[name] = tuple(feature for feature, out in zip(block.features, gone, strict=True) if out)
    return found


def _plain(text: str) -> str:
    return re.sub(r"[^0-9a-z]+", "", text.lower())
