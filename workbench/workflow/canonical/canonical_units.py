"""What a canonical analysis compares: samples, or what a subject's samples are brought to."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import SubjectDesign
from workbench.engine.subjects import centred, differences, subject_means
from workbench.errors import InputError
from workbench.intake import Groups, design_columns, group_codes
from workbench.workflow.analysis_view import AnalysisView, Shared
from workbench.workflow.subjects import require_level, subject_columns, subject_design

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
Kind = Literal["samples", "differences", "deviations", "means"]

FEWEST_UNITS = 5


@dataclass(frozen=True, eq=False)
class Units:
    """Rows of a canonical analysis.

    Attributes
    ----------
    kind : {"samples", "differences", "deviations", "means"}
        Samples; changes between a subject's two; samples less their subject's mean; subjects' means.
    samples : tuple of str
        All samples that are used.
    names : tuple of str
        Samples or subjects, one for each unit.
    design : SubjectDesign or None
        Over the samples; None for independent ones.
    nuisance, within : ndarray of shape (n_units, n_columns)
        To be removed from the units; ``within`` has the group as well, and is None without a group to remove.
    test_nuisance, test_within : ndarray
        The same for the test, which takes deviations apart by itself: over the samples then.
    groups : Groups or None
        Over the units.
    subjects : ndarray of int or None
        Units of one subject stay on one side of a split.
    """

    kind: Kind
    samples: tuple[str, ...]
    names: tuple[str, ...]
    design: SubjectDesign | None
    nuisance: FloatArray
    within: FloatArray | None
    test_nuisance: FloatArray
    test_within: FloatArray | None
    groups: Groups | None
    subjects: IndexArray | None

    @property
    def n(self) -> int:
        """Number of units."""
        return len(self.names)

    @property
    def words(self) -> str:
        """What a unit is, in the plural."""
        return {
            "samples": "samples",
            "differences": "differences between a subject's two samples",
            "deviations": "samples less their subject's mean",
            "means": "means of subjects",
        }[self.kind]

    def samples_of(self, units: IndexArray) -> IndexArray:
        """Rows of the samples that make some units, in the order that :meth:`formed` expects."""
        if self.design is None or self.kind in ("samples", "deviations"):
            return units
        if self.kind == "differences":
            return self.design.pairs[units].T.reshape(-1)
        return np.flatnonzero(np.isin(self.design.subject, units))

    def formed(self, units: IndexArray, values: FloatArray) -> FloatArray:
        """Values of units from values of :meth:`samples_of`; missing where a sample of the unit is missing."""
        if self.design is None or self.kind == "samples":
            return values
        if self.kind == "differences":
            earlier, later = np.split(values, 2)
            return later - earlier
        part = self.design.take(self.samples_of(units))
        return centred(part, values) if self.kind == "deviations" else subject_means(part, values)


def canonical_units(view: AnalysisView, two_sides: bool) -> Units:
    """Return the units of an analysis: samples of all layers for two sides, else of two layers at least.

    Raises
    ------
    InputError
        When nobody said whether changes or subjects are compared, or too few units are left.
    """
    shared = view.shared(list(view.blocks)) if two_sides else held_by_two(view)
    design, level = shared.subjects, view.settings.level
    if design is None or design.kind == "single":
        units = _of_samples(shared)
    elif level == "subjects":
        units = _of_subjects(shared, design)
    else:
        units = _of_changes(shared, design)
    if units.n < FEWEST_UNITS:
        raise InputError(
            f"analysis '{view.name}': {units.n} {units.words} are left of {shared.n} samples"
            f"{'' if design is None else f' ({design.reason})'}, and {FEWEST_UNITS} are the least for canonical pairs"
        )
    return units


def held_by_two(view: AnalysisView) -> Shared:
    """Return the samples that at least two layers have (a layer has a sample when all of its blocks do)."""
    names = list(view.blocks)
    counts = pd.Series(0, index=view.sheet.index)
    for blocks in view.sides.values():
        counts.loc[view.held_by_all(blocks)] += 1
    candidates = [str(sample) for sample in counts.index[counts >= 2]]
    found = view.design(names)
    lacking = found.lacking([*view.factors, *subject_columns(view.study)], candidates)
    samples = [sample for sample in candidates if sample not in lacking]
    if not samples:
        raise InputError(
            f"analysis '{view.name}': no sample is in two of its layers; look at `workbench status`"
        )
    frame = found.frame.loc[samples]
    matrix = design_columns(frame, found.columns, found.kinds)
    groups = group_codes(frame, view.factors, view.study.samples.order) if view.factors else None
    where = f"analysis '{view.name}'"
    subjects = subject_design(frame, view.study, groups, where)
    require_level(subjects, view.settings.level, view.study, where)
    columns = (
        indicators(groups.codes, len(groups.levels)) if groups is not None else np.zeros((len(samples), 0))
    )
    return Shared(tuple(samples), matrix.matrix, tuple(matrix.names), groups, columns, subjects)


def indicators(codes: NDArray[np.intp], levels: int) -> FloatArray:
    """Return one column for each level but the first."""
    return np.asarray(codes[:, None] == np.arange(1, levels), dtype=np.float64)


def _of_samples(shared: Shared) -> Units:
    within = None if shared.groups is None else shared.within
    return Units(
        "samples", shared.samples, shared.samples, None, shared.nuisance, within, shared.nuisance, within,
        shared.groups, None,
    )  # fmt: skip


def _of_subjects(shared: Shared, design: SubjectDesign) -> Units:
    names = _subject_names(shared, design, np.arange(design.n_subjects))
    first = np.array([np.flatnonzero(design.subject == code)[0] for code in range(design.n_subjects)])
    nuisance = subject_means(design, shared.nuisance)
    groups = _constant_groups(shared, design, first)
    within = None if groups is None else np.hstack([nuisance, indicators(groups.codes, len(groups.levels))])
    return Units("means", shared.samples, names, design, nuisance, within, nuisance, within, groups, None)


def _of_changes(shared: Shared, design: SubjectDesign) -> Units:
    held = np.flatnonzero(design.repeated)
    if held.size == 0:
        raise InputError(
            f'level = "visits" compares changes, and no subject has two samples here ({design.reason}); use level = '
            '"subjects"'
        )
    shared = _taken(shared, held)
    design = design.take(held)
    if design.kind == "pairs":
        nuisance = differences(design, shared.nuisance)
        first = design.pairs[:, 0]
        groups = _constant_groups(shared, design, first)
        within = (
            None if groups is None else np.hstack([nuisance, indicators(groups.codes, len(groups.levels))])
        )
        names = _subject_names(shared, design, design.subject[first])
        return Units(
            "differences", shared.samples, names, design, nuisance, within, nuisance, within, groups, None
        )
    visits = np.zeros((design.n_samples, 0))
    if design.kind == "visits":
        visits = np.asarray(design.visit[:, None] == np.unique(design.visit)[None, 1:], dtype=np.float64)
    nuisance = centred(design, np.hstack([shared.nuisance, visits]))
    within = test_within = None
    if shared.groups is not None:
        cells = shared.group_columns
        if _constant_groups(shared, design, np.arange(design.n_samples)) is not None and visits.shape[1]:
            cells = np.hstack([cells[:, [k]] * visits for k in range(cells.shape[1])])
        test_within = np.hstack([shared.nuisance, cells])
        within = centred(design, np.hstack([shared.nuisance, visits, cells]))
    return Units(
        "deviations", shared.samples, shared.samples, design, nuisance, within, shared.nuisance, test_within,
        shared.groups, design.subject,
    )  # fmt: skip


def _taken(shared: Shared, rows: IndexArray) -> Shared:
    groups = None if shared.groups is None else replace(shared.groups, codes=shared.groups.codes[rows])
    return Shared(
        tuple(shared.samples[k] for k in rows),
        shared.nuisance[rows],
        shared.nuisance_names,
        groups,
        shared.group_columns[rows],
        shared.subjects,
    )


def _constant_groups(shared: Shared, design: SubjectDesign, rows: IndexArray) -> Groups | None:
    """Return the groups of some rows where every subject is of one group; None otherwise."""
    if shared.groups is None:
        return None
    codes = shared.groups.codes
    spread = [np.unique(codes[design.subject == code]).size for code in range(design.n_subjects)]
    return replace(shared.groups, codes=codes[rows]) if max(spread) == 1 else None


def _subject_names(
    shared: Shared, design: SubjectDesign, subjects: Sequence[int] | IndexArray
) -> tuple[str, ...]:
    """Return a name for each subject: that of its first sample (the sheet's subject may hold personal data)."""
    return tuple(shared.samples[int(np.flatnonzero(design.subject == code)[0])] for code in subjects)
