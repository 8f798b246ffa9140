"""The blocks of an analysis with the design removed, in a space whose rows may be permuted."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine import Nuisance
from workbench.engine.repeated import subject_space
from workbench.pathways import residual_space, unit_columns
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.screening import design_columns_of, is_repeated

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
    samples: int
    values: dict[str, FloatArray]

    @property
    def rows(self) -> int:
        """Number of rows."""
        return len(next(iter(self.values.values())))


@dataclass
class ResidualViews:
    """The residual blocks of an analysis, each combination of blocks worked out once."""

    view: AnalysisView
    known: dict[tuple[str, ...], ResidualBlocks] = field(default_factory=dict)

    @property
    def within(self) -> bool:
        """Whether the group is removed, as in the screen whose pairs are edges."""
        return bool(self.view.factors) and self.view.settings.network.select == "within"

    def of(self, names: Sequence[str]) -> ResidualBlocks:
        """Return the named blocks on the samples that all of them have."""
        key = tuple(name for name in self.view.blocks if name in set(names))
        if key not in self.known:
            self.known[key] = _residual_blocks(self.view, key, self.within)
        return self.known[key]


def _residual_blocks(view: AnalysisView, names: tuple[str, ...], within: bool) -> ResidualBlocks:
    shared = view.shared(names)
    columns = design_columns_of(view, shared, within)
    ranked = view.settings.network.correlation == "spearman"
    values = {}
    for name in names:
        block = view.blocks[name]
        x = block.values[block.rows(shared.samples)]
        values[name] = rankdata(x, axis=0) if ranked else x
    if is_repeated(shared) and shared.subjects is not None:
        level = view.settings.level or "visits"
        found = subject_space(list(values.values()), shared.subjects, columns, level)
        space = residual_space(found.nuisance.basis).T @ found.matrix
    else:
        space = residual_space(Nuisance.of(columns, shared.n).basis).T
    left = {name: unit_columns(space @ (x - x.mean(axis=0))) for name, x in values.items()}
    return ResidualBlocks(names, shared.n, left)
