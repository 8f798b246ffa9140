"""One block as it was prepared and as it was measured, read from its two files."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.intake import block_design_columns
from workbench.prepare import MeasuredTable
from workbench.settings import BlockSettings
from workbench.store import check_file, read_block
from workbench.workflow.state import ProjectState
from workbench.workflow.tables import excluded, measured_block, table_of


@dataclass(frozen=True)
class LoadedBlock:
    """One block with its prepared values (samples x features), what was imputed, what was measured."""

    name: str
    layer: str
    settings: BlockSettings
    values: NDArray[np.float64]
    imputed: NDArray[np.bool_]
    samples: tuple[str, ...]
    features: tuple[str, ...]
    annotations: pd.DataFrame
    measured: MeasuredTable
    run_columns: pd.DataFrame

    def rows(self, samples: Sequence[str]) -> NDArray[np.intp]:
        """Return the prepared rows of some samples."""
        place = {sample: row for row, sample in enumerate(self.samples)}
        return np.array([place[sample] for sample in samples], dtype=np.intp)

    def measured_rows(self, samples: Sequence[str]) -> MeasuredTable:
        """Return the measured table of some samples, in their order."""
        place = {sample: row for row, sample in enumerate(self.measured.samples)}
        return self.measured.take([place[sample] for sample in samples])


def load_block(state: ProjectState, name: str) -> LoadedBlock:
    """Return a block as it was prepared; both of its files are checked against their hashes first."""
    relative = f"prepared/{name}.h5ad"
    check_file(state.root, relative)
    adata = read_block(state.root / relative)
    settings = state.settings.blocks[name]
    measured = measured_block(state, name)
    return LoadedBlock(
        name=name,
        layer=settings.layer,
        settings=settings,
        values=np.asarray(adata.X, dtype=np.float64),
        imputed=np.asarray(adata.layers["imputed"], dtype=bool),
        samples=tuple(map(str, adata.obs_names)),
        features=tuple(map(str, adata.var_names)),
        annotations=adata.var,
        measured=table_of(measured, excluded(state, name)),
        run_columns=block_design_columns(measured).map(_cell),
    )


def _cell(value: object) -> object:
    """Return a number of a run sheet as the sample sheet has it: as text."""
    return repr(value) if isinstance(value, float) and value == value else value
