"""The second stage: measured values become values fit for linear methods, by the recipe of their kind."""

from __future__ import annotations

import hashlib
import json
from dataclasses import asdict

import numpy as np
import pandas as pd
from anndata import AnnData
from numpy.typing import NDArray

from workbench.errors import InputError
from workbench.intake import group_codes, missing_samples
from workbench.intake.faults import counted
from workbench.prepare import (
    MeasuredTable,
    PreparedTable,
    PrepareRefusal,
    StepAccount,
    group_account,
    group_cautions,
    recipe_for,
)
from workbench.store import Change, check_file, read_block, write_block
from workbench.workflow.analysis_view import factors_of
from workbench.workflow.entry.reading import block_file
from workbench.workflow.fingerprints import block_header, fingerprint
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState
from workbench.workflow.tables import excluded, measured_block, measured_table, table_of

VERSION = 4
SEED = 20260101


def preparing_stage(name: str) -> Stage:
    """Return the stage that writes ``prepared/NAME.h5ad``."""
    return Stage(
        kind="prepare",
        subject=name,
        needs=(f"read:{name}",),
        outputs=(f"prepared/{name}.h5ad",),
        inputs=lambda state: _inputs(state, name),
        work=lambda state, change, reporter: _work(state, change, reporter, name),
    )


def smallest_group(state: ProjectState, samples: tuple[str, ...]) -> int | None:
    """Return the size of the smallest group among some samples, None without a group."""
    factors = factors_of(state.settings)
    if not factors:
        return None
    frame = state.require_sheet().loc[list(samples)]
    lacking = {sample for names in missing_samples(frame, factors).values() for sample in names}
    frame = frame.loc[[sample for sample in samples if sample not in lacking]]
    if frame.empty:
        return None
    codes = group_codes(frame, factors, state.settings.samples.order).codes
    return int(np.unique(codes, return_counts=True)[1].min())


def _inputs(state: ProjectState, name: str) -> dict[str, str]:
    settings = state.settings.blocks[name]
    without = sorted(excluded(state, name))
    held = [str(sample) for sample in state.require_sheet().index if str(sample) not in without]
    return {
        "block": state.manifest.files.get(block_file(name), ""),
        "recipe": fingerprint(
            [VERSION, settings.layer, settings.values, SEED, settings.prepare.model_dump(mode="json")]
        ),
        "excluded samples": fingerprint(without),
        "size of the smallest group": fingerprint(smallest_group(state, tuple(held))),
    }


def _work(state: ProjectState, change: Change, reporter: Reporter, name: str) -> None:
    measured = measured_block(state, name)
    table = table_of(measured, excluded(state, name))
    if len(table.samples) < 2:
        raise InputError(
            f"block '{name}': {counted(len(table.samples), 'sample')} left after exclusions; two are the least"
        )
    del measured.X
    prepared = _prepared(state, name, table)
    for step in prepared.account:
        reporter.say(f"  {step.step}: {step.sentence}")
    for caution in (*prepared.cautions, *_group_cautions(state, prepared)):
        reporter.say(f"  caution: {caution}")
    write_block(change.new_file(f"prepared/{name}.h5ad"), _as_anndata(name, measured, prepared))


def _prepared(state: ProjectState, name: str, table: MeasuredTable) -> PreparedTable:
    """Return the block prepared; a refusal carries its name, its file and the setting to change."""
    settings = state.settings.blocks[name]
    recipe = recipe_for(settings.layer, settings.values, settings.prepare)
    try:
        return recipe.fit_transform(table, smallest_group=smallest_group(state, table.samples), seed=SEED)
    except PrepareRefusal as refusal:
        raise refusal.at(name, settings.file) from refusal
    except InputError as error:
        raise InputError(f"block '{name}' ({settings.file}): {error}") from error


def refusal_of(state: ProjectState, name: str) -> PrepareRefusal | None:
    """Return why a block's table cannot be what it is declared to be, with the setting to change; None: it can."""
    settings = state.settings.blocks[name]
    recipe = recipe_for(settings.layer, settings.values, settings.prepare)
    refusal = recipe.refusal(measured_table(state, name))
    return None if refusal is None else refusal.at(name, settings.file)


def _group_cautions(state: ProjectState, prepared: PreparedTable) -> tuple[str, ...]:
    """Return in what way preparation and groups are tangled; the recipe itself never knew the groups."""
    levels, codes = _groups(state, prepared.samples)
    return group_cautions(prepared, codes, levels) if levels else ()


def _groups(state: ProjectState, samples: tuple[str, ...]) -> tuple[tuple[str, ...], NDArray[np.int_]]:
    """Return the groups' names (none without a group) and the group of each sample, -1 for one without."""
    factors = factors_of(state.settings)
    frame = state.require_sheet().loc[list(samples)]
    lacking = (
        {sample for names in missing_samples(frame, factors).values() for sample in names}
        if factors
        else set()
    )
    held = [sample for sample in samples if sample not in lacking]
    if not factors or not held:
        return (), np.full(len(samples), -1)
    groups = group_codes(frame.loc[held], factors, state.settings.samples.order)
    code = dict(zip(held, groups.codes, strict=True))
    return tuple(groups.levels), np.array([code.get(sample, -1) for sample in samples])


def account_of(state: ProjectState, name: str) -> tuple[StepAccount, ...]:
    """Return what the recipe did to a block, step by step, from its prepared file, and how that meets the groups."""
    path = check_file(state.root, f"prepared/{name}.h5ad")
    steps = tuple(StepAccount(**step) for step in block_header(path)["account"])
    block = read_block(path)
    levels, codes = _groups(state, tuple(map(str, block.obs_names)))
    if not levels:
        return steps
    prepared = PreparedTable(
        values=np.asarray(block.X, dtype=np.float64),
        imputed=np.asarray(block.layers["imputed"], dtype=bool),
        samples=tuple(map(str, block.obs_names)),
        features=tuple(map(str, block.var_names)),
        account=steps,
        origins=(),
        scale=block.obs["log2_scale"].to_numpy(dtype=np.float64),
    )
    return (*steps, group_account(prepared, codes, levels))


def _as_anndata(name: str, measured: AnnData, prepared: PreparedTable) -> AnnData:
    var = measured.var.loc[list(prepared.origins)].set_axis(pd.Index(prepared.features, dtype=object))
    if prepared.origins != prepared.features:
        var = var.assign(origin=list(prepared.origins))
    header = {
        "kind": "prepared",
        "block": name,
        "content_sha256": content_hash(prepared),
        "measured_sha256": json.loads(measured.uns["workbench"])["content_sha256"],
        "account": [asdict(step) for step in prepared.account],
    }
    return AnnData(
        X=prepared.values,
        obs=measured.obs.loc[list(prepared.samples)].assign(log2_scale=prepared.scale),
        var=var,
        layers={"imputed": prepared.imputed},
        uns={"workbench": json.dumps(header)},
    )


def content_hash(prepared: PreparedTable) -> str:
    """Return the sha256 of values, mask, sample ids and feature ids."""
    digest = hashlib.sha256()
    for part in (prepared.values, prepared.imputed):
        digest.update(np.ascontiguousarray(part).tobytes())
    for names in (prepared.samples, prepared.features):
        digest.update("\x00".join(names).encode("utf-8", "surrogatepass") + b"\x01")
    return digest.hexdigest()
