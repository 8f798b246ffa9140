"""Stored blocks as the tables that preparation reads."""

from __future__ import annotations

import json

import numpy as np
import pandas as pd
from anndata import AnnData

from workbench.prepare import MeasuredTable
from workbench.prepare.runs import run_table
from workbench.store import check_file, read_block
from workbench.workflow.state import ProjectState


def measured_block(state: ProjectState, name: str) -> AnnData:
    """Return the measured block, its file checked against its hash."""
    relative = f"blocks/{name}.h5ad"
    check_file(state.root, relative)
    return read_block(state.root / relative)


def measured_table(state: ProjectState, name: str) -> MeasuredTable:
    """Return the measured values of a block without the samples that the settings exclude."""
    return table_of(measured_block(state, name), excluded(state, name))


def table_of(adata: AnnData, without: dict[str, str]) -> MeasuredTable:
    """Return a block's values as a table, leaving out the samples named in ``without``."""
    keep = [row for row, sample in enumerate(adata.obs_names) if str(sample) not in without]
    levels = None
    if "levels" in adata.var:
        levels = tuple(tuple(json.loads(text)) if text else None for text in adata.var["levels"])
    samples = tuple(str(adata.obs_names[row]) for row in keep)
    runs = None
    if "run_sheet" in adata.uns:
        runs = run_table(adata.uns["run_sheet"], adata.uns["run_values"]).for_samples(samples)
    values = np.asarray(adata.X, dtype=np.float64)
    return MeasuredTable(
        values=values if len(keep) == len(values) else values[keep],
        samples=samples,
        features=tuple(map(str, adata.var_names)),
        levels=levels,
        runs=runs,
    )


def plain_table(adata: AnnData) -> pd.DataFrame:
    """Return a block's values as a plain table, samples in rows; text features come back as text."""
    frame = pd.DataFrame(np.asarray(adata.X), index=pd.Index(map(str, adata.obs_names), name="sample"))
    frame.columns = pd.Index(map(str, adata.var_names), dtype=object)
    levels = adata.var["levels"] if "levels" in adata.var and "origin" not in adata.var else ()
    for column, text in zip(frame.columns, levels, strict=False):
        if text:
            names = json.loads(text)
            frame[column] = ["" if np.isnan(code) else names[int(code)] for code in frame[column]]
    return frame.reset_index()


def excluded(state: ProjectState, name: str) -> dict[str, str]:
    """Return the samples that the study or the block excludes, with the reason."""
    return {**state.settings.samples.exclude, **state.settings.blocks[name].exclude}
