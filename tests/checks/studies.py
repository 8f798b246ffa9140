"""Simulated studies as the checks see them, without a project on disk."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
from anndata import AnnData
from simulated import Design, Study, clinical, metabolites, proteins, simulate, transcripts

from workbench.checks import study_data
from workbench.checks.registry import CHECKS
from workbench.checks.swapped import swapped_samples
from workbench.errors import InputError
from workbench.prepare import MeasuredTable
from workbench.prepare.recipe import recipe_for
from workbench.settings import parse_settings

ALONE = tuple(check for check in CHECKS if check is not swapped_samples)
"""Checks that look at no more than one block at a time, or at the design: all but the search for swaps."""

SMALL = (
    transcripts(features=600, module_size=40, group_effect=1.0),
    metabolites(features=120, module_size=10, group_effect=1.0),
)
SMALL_THREE = (
    transcripts(features=400, module_size=30),
    proteins(features=150, module_size=12),
    clinical(features=24),
)


def sheet_of(study: Study) -> pd.DataFrame:
    """Return the sample sheet as it is read: text."""
    return study.samples.astype(str)


def settings_of(study, *, adjust=("run_day",), own=None, group=("group",), values=None, more=""):
    """Return the settings of a study: ``own`` is each block's adjust (its run order if left out)."""
    named = [column for column in adjust if column in study.samples]
    groups = [column for column in group if column in study.samples]
    lines = [
        "format = 1",
        "[samples]",
        f"adjust = {json.dumps(named)}",
        f"group = {json.dumps(groups)}",
        more,
    ]
    for block in study.design.blocks:
        order = [column for column in (f"{block.name}_order", f"{block.name}_day") if column in study.samples]
        columns = (own or {}).get(block.name, order)
        lines += [
            f"[blocks.{block.name}]",
            f'file = "source/{block.name}.tsv"',
            f'layer = "{block.layer}"',
            f'values = "{(values or {}).get(block.name, block.values)}"',
            f"adjust = {json.dumps(list(columns))}",
        ]
    return parse_settings("\n".join(lines) + "\n", Path("project.toml"))


def measured_of(table: pd.DataFrame, sheet: pd.DataFrame) -> AnnData:
    """Return a delivered table (samples x features) as it is stored after intake: text coded by its levels."""
    table = table.loc[[sample for sample in sheet.index if sample in table.index]]
    var = pd.DataFrame(index=pd.Index(table.columns, dtype=object))
    text = [name for name in table if table[name].dtype == object]
    if text:
        levels = {name: sorted(table[name].dropna().unique()) for name in text}
        var["kind"] = ["text" if name in levels else "number" for name in table]
        var["levels"] = [json.dumps(levels[name]) if name in levels else "" for name in table]
        code = {name: {level: float(k) for k, level in enumerate(its)} for name, its in levels.items()}
        table = table.apply(lambda column: column.map(code[column.name]) if column.name in code else column)
    return AnnData(X=table.to_numpy(dtype=np.float64), obs=sheet.loc[list(table.index)].copy(), var=var)


def prepared_of(measured: AnnData, layer: str, values: str) -> AnnData | None:
    """Return prepared values by the recipe of the kind, None where it refuses the table."""
    levels = None
    if "levels" in measured.var:
        levels = tuple(tuple(json.loads(text)) if text else None for text in measured.var["levels"])
    table = MeasuredTable(
        np.asarray(measured.X), tuple(measured.obs_names), tuple(measured.var_names), levels
    )
    try:
        found = recipe_for(layer, values).fit_transform(table, smallest_group=None, seed=1)
    except InputError:
        return None
    return AnnData(
        X=found.values,
        obs=pd.DataFrame(index=list(found.samples)),
        var=pd.DataFrame(index=list(found.features)),
        layers={"imputed": found.imputed},
    )


def checked(study: Study, *, tables=None, sheet=None, settings=None, spare_tables=None, **said):
    """Return a study for the checks; ``tables`` replaces delivered tables, ``said`` goes to the settings."""
    sheet = sheet_of(study) if sheet is None else sheet
    settings = settings or settings_of(study, **said)
    measured, prepared = {}, {}
    for name, own in settings.blocks.items():
        measured[name] = measured_of({**study.blocks, **(tables or {})}[name], sheet)
        found = prepared_of(measured[name], own.layer, own.values)
        if found is not None:
            prepared[name] = found
    return study_data(settings, sheet, measured, prepared, spare_tables)


def small_study(n=24, seed=1, blocks=SMALL, **changes) -> Study:
    """Return a small study of two blocks."""
    return simulate(Design(n=n, blocks=blocks, **{"modules": 3, **changes}), seed)
