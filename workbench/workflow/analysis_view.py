"""What an analysis works on: its blocks side by side, the samples that they share, and the design."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import SubjectDesign, aliased
from workbench.engine.alias_equations import alias_equations
from workbench.errors import InputError
from workbench.intake import Groups, design_columns, group_codes
from workbench.settings import AnalysisSettings, Settings
from workbench.workflow.design_frame import DesignFrame, design_frame
from workbench.workflow.loaded_block import LoadedBlock, load_block
from workbench.workflow.state import ProjectState
from workbench.workflow.subjects import require_level, subject_columns, subject_design

LEAST_FREEDOM = 3


@dataclass(frozen=True)
class Shared:
    """Samples that some blocks share, with their design.

    ``nuisance`` (n, c) holds the columns to be removed (no intercept), ``groups`` the cell of each sample
    (None without a group), ``group_columns`` its indicators without the first level, ``subjects`` which samples
    are of one subject (None without a subject column).
    """

    samples: tuple[str, ...]
    nuisance: NDArray[np.float64]
    nuisance_names: tuple[str, ...]
    groups: Groups | None
    group_columns: NDArray[np.float64]
    subjects: SubjectDesign | None = None

    @property
    def n(self) -> int:
        """Number of samples."""
        return len(self.samples)

    @property
    def groups_of_subjects(self) -> bool:
        """Whether all samples of a subject are of one group."""
        if self.groups is None or self.subjects is None:
            return True
        first = np.unique(self.subjects.subject, return_index=True)[1]
        return np.array_equal(self.groups.codes, self.groups.codes[first][self.subjects.subject])

    @property
    def within(self) -> NDArray[np.float64]:
        """Nuisance and group together: what is removed for a screen within groups."""
        return np.hstack([self.nuisance, self.group_columns])


@dataclass(frozen=True)
class AnalysisView:
    """An analysis with its blocks loaded; ``left_out`` maps a sample to the reason why no block uses it."""

    name: str
    settings: AnalysisSettings
    study: Settings
    sheet: pd.DataFrame
    blocks: dict[str, LoadedBlock]

    @property
    def layers(self) -> tuple[str, ...]:
        """Layers in the order of their first block."""
        return tuple(dict.fromkeys(block.layer for block in self.blocks.values()))

    @property
    def sides(self) -> dict[str, tuple[str, ...]]:
        """Names of the blocks of each layer: blocks of one layer stand on one side."""
        return {
            layer: tuple(name for name, block in self.blocks.items() if block.layer == layer)
            for layer in self.layers
        }

    @property
    def pairs(self) -> tuple[tuple[str, str], ...]:
        """Pairs of blocks of different layers, in the order of the blocks."""
        return tuple(
            (first, second)
            for first, second in combinations(self.blocks, 2)
            if self.blocks[first].layer != self.blocks[second].layer
        )

    def shared(self, names: Sequence[str]) -> Shared:
        """Return the samples that the named blocks share and have a known design for.

        Raises `InputError` when columns of the design say the same, or leave too few degrees of freedom.
        """
        found = self.design(names)
        lacking = self.lacking_design(names)
        samples = [sample for sample in self.held_by_all(names) if sample not in lacking]
        frame = found.frame.loc[samples]
        design = design_columns(frame, found.columns, found.kinds)
        groups = group_codes(frame, self.factors, self.study.samples.order) if self.factors else None
        where = self._where(names)
        subjects = subject_design(frame, self.study, groups, where)
        require_level(subjects, self.settings.level, self.study, where)
        shared = Shared(
            tuple(samples),
            design.matrix,
            tuple(design.names),
            groups,
            _group_indicators(groups, len(samples)),
            subjects,
        )
        self._require_usable(shared, names)
        return shared

    def design(self, names: Sequence[str]) -> DesignFrame:
        """Return the nuisance columns of the study and of the named blocks."""
        return design_frame(self.sheet, self.study, [self.blocks[name] for name in names])

    def held_by_all(self, names: Sequence[str]) -> list[str]:
        """Return the samples that all named blocks have, in sheet order."""
        every = [set(self.blocks[name].samples) for name in names]
        return [str(sample) for sample in self.sheet.index if all(sample in one for one in every)]

    @property
    def within_groups(self) -> bool:
        """Whether edges are selected with the group removed."""
        return bool(self.factors) and self.settings.network.select == "within"

    @property
    def factors(self) -> list[str]:
        """Columns of the sample sheet whose cells are the groups."""
        return factors_of(self.study)

    def lacking_design(self, names: Sequence[str]) -> dict[str, str]:
        """Return the samples with an empty cell in a used design column, with the reason."""
        used = [*self.factors, *subject_columns(self.study)]
        return self.design(names).lacking(used, self.held_by_all(names))

    def _where(self, names: Sequence[str]) -> str:
        what = " and ".join(f"'{name}'" for name in names)
        return f"analysis '{self.name}', blocks {what}"

    def _require_usable(self, shared: Shared, names: Sequence[str]) -> None:
        where = self._where(names)
        _require_levels(shared, where, self.factors)
        group_names = [f"{'+'.join(self.factors)} (group)"] * shared.group_columns.shape[1]
        tangled = aliased(shared.within, [*shared.nuisance_names, *group_names])
        if tangled:
            levels = () if shared.groups is None else shared.groups.levels[1:]
            parts = [*shared.nuisance_names, *(f"{'+'.join(self.factors)}={level}" for level in levels)]
            raise InputError(
                f"{where}: {', '.join(tangled)} cannot be told apart from the columns before, as on the {shared.n} "
                f"shared samples {' and '.join(alias_equations(shared.within, parts))} (a class counts 1 in its "
                "samples and 0 elsewhere), so that its effect has no estimate; take one of them out of adjust or group "
                "in project.toml"
            )
        freedom = shared.n - shared.within.shape[1] - 2
        if freedom < LEAST_FREEDOM:
            raise InputError(
                f"{where}: {shared.n} shared samples less {shared.within.shape[1]} design columns leave "
                f"{freedom} degree{'s' * (freedom != 1)} of freedom for a correlation; {LEAST_FREEDOM} are the least. "
                "Add samples, or take nuisance columns out of adjust in project.toml"
            )


def factors_of(settings: Settings) -> list[str]:
    """Return the columns whose cells are the groups, empty without a group."""
    return list(settings.samples.group)


def subject_names(view: AnalysisView, samples: Sequence[str]) -> list[str]:
    """Return the subjects of some samples, in the order in which a design numbers them."""
    column = view.study.samples.subject
    return [] if column is None else sorted(set(view.sheet.loc[list(samples), column].astype(str)))


def blocks_of(settings: Settings, analysis: str) -> list[str]:
    """Return the names of the blocks of an analysis, in the order of the project's blocks or of its list."""
    chosen = settings.analyses[analysis].blocks
    return list(settings.blocks) if chosen == "all" else list(chosen)


def view_analysis(state: ProjectState, name: str) -> AnalysisView:
    """Load what the analysis needs; every file is checked against its hash first."""
    blocks = {block: load_block(state, block) for block in blocks_of(state.settings, name)}
    return AnalysisView(name, state.settings.analyses[name], state.settings, state.require_sheet(), blocks)


def _group_indicators(groups: Groups | None, n: int) -> NDArray[np.float64]:
    if groups is None:
        return np.zeros((n, 0))
    return np.asarray(groups.codes[:, None] == np.arange(1, len(groups.levels)), dtype=np.float64)


def _require_levels(shared: Shared, where: str, factors: list[str]) -> None:
    if shared.n == 0:
        raise InputError(
            f"{where}: no sample is in all of them; look at `workbench status` and the sample sheet"
        )
    if shared.groups is not None and len(shared.groups.levels) < 2:
        raise InputError(
            f"{where}: group '{'+'.join(factors)}' has one level ('{shared.groups.levels[0]}') among the "
            f"{shared.n} shared samples; remove samples.group from project.toml, or add samples of another level"
        )
