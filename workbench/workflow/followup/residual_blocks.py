"""The blocks of an analysis as its screen saw them, in a space whose rows may be permuted."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from workbench.engine import Nuisance
from workbench.pathways import residual_space, unit_columns
from workbench.workflow.analysis_view import AnalysisView, Shared, view_analysis
from workbench.workflow.network.private import PrivatePart, read_private
from workbench.workflow.network.screening import design_columns_of, is_repeated
from workbench.workflow.network.tested_values import tested_on_rows, tested_on_samples
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

    ``private`` holds what the network stage did to each block before it tested pairs.
    """

    view: AnalysisView
    private: Mapping[str, PrivatePart | None]
    known: dict[tuple[str, ...], ResidualBlocks] = field(default_factory=dict)

    @classmethod
    def of_analysis(cls, state: ProjectState, name: str) -> ResidualViews:
        """Return the views of an analysis, with the private variation that its network stage removed."""
        view = view_analysis(state, name)
        return cls(view, {block: read_private(state, name, block) for block in view.blocks})

    def of(self, names: Sequence[str]) -> ResidualBlocks:
        """Return the named blocks on the samples that all of them have."""
        key = tuple(name for name in self.view.blocks if name in set(names))
        if key not in self.known:
            self.known[key] = self._residual_blocks(key)
        return self.known[key]

    def _residual_blocks(self, names: tuple[str, ...]) -> ResidualBlocks:
        names, asked = self._with_another_layer(names), names
        shared, within = self.view.shared(names), self.view.within_groups
        columns = design_columns_of(self.view, shared, within)
        if is_repeated(shared):
            found = tested_on_rows(self.view, names, shared, columns, within)
            values, nuisance = found.values, found.space.nuisance
        else:
            values = {name: self._values(name, shared, columns) for name in names}
            nuisance = Nuisance.of(columns, shared.n)
        space = residual_space(nuisance.basis).T
        left = {name: unit_columns(space @ values[name]) for name in asked}
        return ResidualBlocks(asked, shared.samples, left)

    def _with_another_layer(self, names: tuple[str, ...]) -> tuple[str, ...]:
        """Add a block of another layer to repeated blocks of one layer: beside it their private variation was told."""
        layers = {self.view.blocks[name].layer for name in names}
        others = [name for name, block in self.view.blocks.items() if block.layer not in layers]
        if len(layers) > 1 or not others or not is_repeated(self.view.shared(names)):
            return names
        return (*names, others[0])

    def _values(self, name: str, shared: Shared, columns: FloatArray) -> FloatArray:
        x = self.view.blocks[name].values[self.view.blocks[name].rows(shared.samples)]
        return tested_on_samples(self.view, x, shared.samples, columns, self.private.get(name))
