"""The blocks of an analysis as its screen saw them, in a space whose rows may be permuted."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine import Nuisance
from workbench.engine.far_values import withstand
from workbench.engine.repeated import subject_space
from workbench.pathways import residual_space, unit_columns
from workbench.workflow.analysis_view import AnalysisView, Shared, view_analysis
from workbench.workflow.private import read_scores
from workbench.workflow.screening import design_columns_of, is_repeated
from workbench.workflow.state import ProjectState

FloatArray = NDArray[np.float64]

LEAST_ROWS = 5
"""Rows without the design under which nothing is permuted: 120 orders of 5 rows are the fewest that tell anything."""


@dataclass(frozen=True, eq=False)
class ResidualBlocks:
    """Blocks on the samples that they share: ``values`` of each (rows, features), columns of unit length.

    The rows are what is left of the samples once the design is taken out (``n - c`` of them), so that the product of
    two columns is their correlation with the design removed, and rows of one block may be permuted against others.
    """

    names: tuple[str, ...]
    samples: tuple[str, ...]
    values: dict[str, FloatArray]

    @property
    def rows(self) -> int:
        """Number of rows."""
        return len(next(iter(self.values.values())))


@dataclass
class ResidualViews:
    """The residual blocks of an analysis, each combination of blocks worked out once.

    ``private`` holds, for each block that had private variation removed, its scores by sample.
    """

    view: AnalysisView
    private: Mapping[str, pd.DataFrame | None]
    known: dict[tuple[str, ...], ResidualBlocks] = field(default_factory=dict)

    @classmethod
    def of_analysis(cls, state: ProjectState, name: str) -> ResidualViews:
        """Return the views of an analysis, with the private variation that its network stage removed."""
        view = view_analysis(state, name)
        return cls(view, {block: read_scores(state, name, block) for block in view.blocks})

    def of(self, names: Sequence[str]) -> ResidualBlocks:
        """Return the named blocks on the samples that all of them have."""
        key = tuple(name for name in self.view.blocks if name in set(names))
        if key not in self.known:
            self.known[key] = self._residual_blocks(key)
        return self.known[key]

    def _residual_blocks(self, names: tuple[str, ...]) -> ResidualBlocks:
        shared = self.view.shared(names)
        columns = design_columns_of(self.view, shared, self.view.within_groups)
        values = {name: self._values(name, shared, columns) for name in names}
        if is_repeated(shared) and shared.subjects is not None:
            level = self.view.settings.level or "visits"
            found = subject_space(list(values.values()), shared.subjects, columns, level)
            space = residual_space(found.nuisance.basis).T @ found.matrix
        else:
            space = residual_space(Nuisance.of(columns, shared.n).basis).T
        left = {name: unit_columns(space @ (x - x.mean(axis=0))) for name, x in values.items()}
        return ResidualBlocks(names, shared.samples, left)

    def _values(self, name: str, shared: Shared, columns: FloatArray) -> FloatArray:
        """Return a block's values, without its private variation where that was removed, ranked for Spearman's r."""
        block = self.view.blocks[name]
        x = block.values[block.rows(shared.samples)]
        scores = self.private.get(name)
        if scores is not None:
            own = Nuisance.of(np.column_stack([columns, scores.loc[list(shared.samples)]]), shared.n)
            x = withstand(own.residuals(x), own.n_samples - own.rank)
        if self.view.settings.network.correlation == "spearman":
            x = np.asarray(rankdata(x, axis=0), dtype=np.float64)
        return x
