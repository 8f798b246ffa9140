"""From the stored blocks of a project to what the checks look at."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from workbench.checks.data import CheckedBlock, FloatArray, IndexArray, Levels, StudyData
from workbench.errors import InputError
from workbench.intake import block_design_columns, design_columns, group_codes, missing_samples
from workbench.intake.faults import listed
from workbench.settings import Settings

if TYPE_CHECKING:
    from anndata import AnnData

TECHNICAL_COLUMNS = ("kind", "levels")


def study_data(
    settings: Settings,
    sheet: pd.DataFrame,
    measured: Mapping[str, AnnData],
    prepared: Mapping[str, AnnData] | None = None,
    spare_tables: Mapping[str, pd.DataFrame] | None = None,
) -> StudyData:
    """Return a study for the checks, from its stored blocks.

    Samples that the study or a block excludes are left out of the block here.

    Parameters
    ----------
    settings : Settings
    sheet : DataFrame
        The whole sample sheet, indexed by sample id.
    measured, prepared : mapping of str to AnnData
        By block name; a block that is missing in ``prepared`` is checked as far as measured values go.
    spare_tables : mapping of str to DataFrame, optional
        Further tables of text of the project by file name.

    Raises
    ------
    InputError
        When prepared values lack a sample of the measured ones: they are older than the settings.
    """
    ready = prepared or {}
    blocks = {
        name: checked_block(name, settings, sheet, measured[name], ready.get(name))
        for name in settings.blocks
        if name in measured
    }
    return StudyData(settings, sheet, blocks, dict(spare_tables or {}))


def checked_block(
    name: str, settings: Settings, sheet: pd.DataFrame, measured: AnnData, prepared: AnnData | None = None
) -> CheckedBlock:
    """Return one block for the checks; see :func:`study_data`."""
    own = settings.blocks[name]
    left_out = {**settings.samples.exclude, **own.exclude}
    names = [str(sample) for sample in measured.obs_names]
    rows = [row for row, sample in enumerate(names) if sample not in left_out]
    samples = tuple(names[row] for row in rows)
    runs, run_values = _runs(measured)
    columns = _columns(sheet, samples, measured)
    adjust = tuple(dict.fromkeys([*settings.samples.adjust, *own.adjust]))
    nuisance, nuisance_names, fault = _nuisance(columns, adjust, settings.samples.kinds)
    codes, levels = _groups(columns, settings)
    return CheckedBlock(
        name=name,
        layer=own.layer,
        values=own.values,
        settings=own,
        samples=samples,
        features=tuple(map(str, measured.var_names)),
        measured=np.asarray(measured.X, dtype=np.float64)[rows],
        columns=columns,
        adjust=adjust,
        nuisance=nuisance,
        nuisance_names=nuisance_names,
        group_codes=codes,
        group_levels=levels,
        levels=_levels(measured),
        prepared=None if prepared is None else _prepared(name, prepared, samples),
        prepared_features=() if prepared is None else tuple(map(str, prepared.var_names)),
        imputed=None if prepared is None else _rows_of(prepared, samples, prepared.layers["imputed"]) > 0,
        annotations=measured.var.drop(columns=[c for c in TECHNICAL_COLUMNS if c in measured.var]),
        runs=runs,
        run_values=run_values,
        design_fault=fault,
    )


def _prepared(name: str, prepared: AnnData, samples: tuple[str, ...]) -> FloatArray:
    lacking = sorted(set(samples) - set(map(str, prepared.obs_names)))
    if lacking:
        raise InputError(
            f"the prepared values of block '{name}' lack {listed(lacking)}; run `workbench prepare {name}` again"
        )
    return _rows_of(prepared, samples, prepared.X)


def _rows_of(prepared: AnnData, samples: tuple[str, ...], values: object) -> FloatArray:
    place = {str(sample): row for row, sample in enumerate(prepared.obs_names)}
    return np.asarray(values, dtype=np.float64)[[place[sample] for sample in samples if sample in place]]


def _levels(measured: AnnData) -> Levels:
    if "levels" not in measured.var or "kind" not in measured.var:
        return (None,) * int(measured.n_vars)
    every: list[tuple[str, ...] | None] = []
    for text in measured.var["levels"]:
        every.append(tuple(map(str, json.loads(str(text)))) if text else None)
    return tuple(every)


def _runs(measured: AnnData) -> tuple[pd.DataFrame | None, FloatArray | None]:
    if "run_sheet" not in measured.uns or "run_values" not in measured.uns:
        return None, None
    return measured.uns["run_sheet"], np.asarray(measured.uns["run_values"], dtype=np.float64)


def _columns(sheet: pd.DataFrame, samples: tuple[str, ...], measured: AnnData) -> pd.DataFrame:
    """Return the sheet's rows with the columns of the block's run sheet, which go before those of one name."""
    of_sheet = sheet.loc[list(samples)]
    of_runs = block_design_columns(measured).reindex(list(samples))
    twice = [name for name in of_runs if name in of_sheet]
    return of_sheet.drop(columns=twice).join(of_runs) if len(of_runs.columns) else of_sheet


def _nuisance(
    columns: pd.DataFrame, adjust: tuple[str, ...], kinds: Mapping[str, str]
) -> tuple[FloatArray, tuple[str, ...], str]:
    """Return the nuisance columns, NaN rows where a sample lacks one, and why they could not be read."""
    known = [column for column in adjust if column in columns]
    lacking = {sample for names in missing_samples(columns, known).values() for sample in names}
    held = np.array([str(sample) not in lacking for sample in columns.index], dtype=bool)
    if not held.any():
        return np.empty((len(columns), 0)), (), "" if not known else "no sample has a value in all of them"
    try:
        design = design_columns(columns.loc[held], known, kinds)
    except InputError as error:
        return np.empty((len(columns), 0)), (), str(error)
    matrix = np.full((len(columns), len(design.names)), np.nan)
    matrix[held] = design.matrix
    return matrix, tuple(design.names), ""


def _groups(columns: pd.DataFrame, settings: Settings) -> tuple[IndexArray, tuple[str, ...]]:
    codes = np.full(len(columns), -1, dtype=np.intp)
    factors = [factor for factor in settings.samples.group if factor in columns]
    if not factors:
        return codes, ()
    lacking = {sample for names in missing_samples(columns, factors).values() for sample in names}
    held = np.array([str(sample) not in lacking for sample in columns.index], dtype=bool)
    if not held.any():
        return codes, ()
    groups = group_codes(columns.loc[held], factors, settings.samples.order)
    codes[held] = groups.codes
    return codes, tuple(groups.levels)
