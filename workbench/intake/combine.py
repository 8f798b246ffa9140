"""Several runs of a sample made one row, and the columns of the run sheet given per sample."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from .faults import counted, listed, shown
from .kinds import column_kind, column_numbers, present

if TYPE_CHECKING:
    import anndata

JOINT = "+"
_NO_NUISANCE = ("sample", "role")
_CODES = ("batch", "replicate")


def combined_runs(
    values: pd.DataFrame, sample: pd.Series, samples: Sequence[str], *, total: bool
) -> pd.DataFrame:
    """Return one row per sample from the values of its runs.

    Parameters
    ----------
    values
        DataFrame (runs, features), NaN where missing.
    sample
        Sample of each run, indexed by run.
    samples
        Samples that have runs, in the order of the rows that come back.
    total
        Whether the runs are added up (counts: a sum with a missing part is missing); else their mean is taken,
        over the runs that have a value.

    Examples
    --------
    >>> values = pd.DataFrame({"g": [1.0, 3.0, float("nan")]}, index=["r1", "r2", "r3"])
    >>> sample = pd.Series(["A", "A", "A"], index=values.index)
    >>> combined_runs(values, sample, ["A"], total=False)["g"].tolist()
    [2.0]
    """
    rows = np.empty((len(samples), values.shape[1]))
    cells, places = values.to_numpy(), sample.reindex(values.index).groupby(sample).indices
    for k, name in enumerate(samples):
        own = cells[places[name]]
        rows[k] = own.sum(axis=0) if total else _mean(own)
    return pd.DataFrame(rows, index=pd.Index(list(samples), dtype=object), columns=values.columns)


def _mean(own: np.ndarray) -> np.ndarray:
    held = np.count_nonzero(~np.isnan(own), axis=0)
    sums = np.where(np.isnan(own), 0.0, own).sum(axis=0)
    mean = np.full(own.shape[1], np.nan)
    np.divide(sums, held, out=mean, where=held > 0)
    return mean


def block_design_columns(adata: anndata.AnnData) -> pd.DataFrame:
    """Return, for each sample of a block, its value of each run-sheet column.

    The value that all runs of the sample share; otherwise the mean, where the column holds numbers (``order``
    and further columns that are no codes: the mean run is what the mean over the runs depends on), or the
    different values joined by ``+`` (``b1+b2``), a class of its own. Missing where a run of the sample lacks it.

    Parameters
    ----------
    adata
        A block; one without runs has no such columns.

    Returns
    -------
    DataFrame
        Indexed by sample; ``order`` float64, other columns text, NaN where missing.
    """
    index = adata.obs_names
    if "run_sheet" not in adata.uns:
        return pd.DataFrame(index=index)
    runs: pd.DataFrame = adata.uns["run_sheet"]
    own = runs[runs["role"] == "sample"]
    columns = [name for name in runs.columns if name not in _NO_NUISANCE]
    found = {name: _per_sample(own[name], own["sample"]) for name in columns}
    frame = pd.DataFrame(found, index=pd.Index(dict.fromkeys(own["sample"]), dtype=object))
    return frame.reindex(index)


def with_run_columns(adata: anndata.AnnData) -> pd.DataFrame:
    """Return the sample-sheet rows of a block with the columns of its run sheet.

    A column that both have is the run sheet's: it speaks of this assay.
    """
    own, obs = block_design_columns(adata), pd.DataFrame(adata.obs)
    return obs.drop(columns=[name for name in own if name in obs]).join(own)


def _per_sample(column: pd.Series, sample: pd.Series) -> pd.Series:
    numeric = column.dtype.kind == "f" or (column.name not in _CODES and column_kind(column) == "number")
    held = present(column.astype(object)) if column.dtype.kind != "f" else column.dropna()
    lacking = set(sample[~sample.index.isin(held.index)])
    values = {
        name: np.nan if name in lacking else _value(held[held.index.isin(runs)], numeric)
        for name, runs in sample.groupby(sample, sort=False).groups.items()
    }
    return pd.Series(values, dtype=np.float64 if column.dtype.kind == "f" else object)


def _value(cells: pd.Series, numeric: bool) -> object:
    different = list(dict.fromkeys(cells))
    if len(different) == 1:
        return different[0]
    if not numeric:
        return JOINT.join(sorted(different))
    numbers = cells if cells.dtype.kind == "f" else column_numbers(cells)
    mean = float(np.mean(np.asarray(numbers, dtype=np.float64)))
    return mean if cells.dtype.kind == "f" else repr(mean)


def mixed_columns(adata: anndata.AnnData) -> list[str]:
    """Return sentences about columns in which the runs of a sample differ."""
    frame = block_design_columns(adata)
    told = []
    for name in frame.columns:
        if name in ("order", "replicate"):
            continue
        joint = [cell for cell in frame[name].dropna() if isinstance(cell, str) and JOINT in cell]
        own = set(adata.uns["run_sheet"][name])
        joint = [cell for cell in joint if cell not in own]
        if joint:
            told.append(
                f"column {shown(name)} differs between the runs of {counted(len(joint), 'sample')}, which count as "
                f"classes of their own: {listed(sorted(set(joint)), 3)}"
            )
    return told
