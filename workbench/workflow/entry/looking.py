"""The first look: each block on its own, and how far the blocks agree; tables, figures and a reading in words."""

from __future__ import annotations

import numpy as np
import pandas as pd

from workbench.figures import draw_between, draw_look, draw_preparation
from workbench.intake import design_columns, group_codes, missing_samples
from workbench.look import (
    BlockView,
    Levels,
    PreparationLook,
    Restriction,
    between_reading,
    between_table,
    block_reading,
    levels_of,
    look_at_block,
    look_at_preparation,
    look_between,
    look_tables,
    preparation_reading,
    preparation_tables,
)
from workbench.prepare import PreparedSize, account_page, account_table, drift_effect, recipe_for
from workbench.store import Change, check_file, read_block, table_bytes
from workbench.workflow.analysis_view import factors_of
from workbench.workflow.design_frame import design_frame
from workbench.workflow.drawings import write_drawings
from workbench.workflow.entry.preparing import SEED as PREPARE_SEED
from workbench.workflow.entry.preparing import account_of, smallest_group
from workbench.workflow.fingerprints import block_header, columns_fingerprint, fingerprint
from workbench.workflow.loaded_block import LoadedBlock, load_block
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState
from workbench.workflow.tables import measured_table

VERSION = 3
SEED = 20260101
BETWEEN = "between-blocks"


def looking_stage(name: str) -> Stage:
    """Return the stage that writes ``results/look/NAME/``."""
    return Stage(
        kind="look",
        subject=name,
        needs=(f"prepare:{name}",),
        outputs=tuple(
            f"results/look/{name}/{file}" for file in ("reading.txt", "recipe.tsv", "preparation.md")
        ),
        inputs=lambda state: _inputs(state, [name]),
        work=lambda state, change, reporter: _look(state, change, reporter, name),
    )


def between_stage(names: list[str]) -> Stage:
    """Return the stage that writes how far every two blocks agree, into ``results/look/``."""
    return Stage(
        kind="look",
        subject=BETWEEN,
        needs=tuple(f"prepare:{name}" for name in names),
        outputs=("results/look/agreement.tsv", "results/look/reading.txt"),
        inputs=lambda state: _inputs(state, names),
        work=lambda state, change, reporter: _look_between(state, change, reporter, names),
    )


def _inputs(state: ProjectState, names: list[str]) -> dict[str, str]:
    sheet, samples = state.require_sheet(), state.settings.samples
    hashes = {
        "sample sheet": columns_fingerprint(sheet, list(sheet.columns)),
        "settings": fingerprint(
            [VERSION, samples.model_dump(mode="json"), {name: _adjust(state, name) for name in names}]
        ),
    }
    for name in names:
        header = block_header(state.paths.prepared_block(name))
        hashes[f"block {name}"] = fingerprint([header["content_sha256"], header["measured_sha256"]])
        hashes[f"account of {name}"] = fingerprint(header["account"])
    return hashes


def _look(state: ProjectState, change: Change, reporter: Reporter, name: str) -> list[str]:
    view = view_block(state, name)
    look = look_at_block(view, seed=SEED)
    preparation = view_preparation(state, view, look.shapes)
    reading = (*block_reading(look), *preparation_reading(preparation))
    folder = f"results/look/{name}"
    written = []
    tables = {
        **look_tables(look),
        **preparation_tables(preparation),
        "recipe": account_table(preparation.account),
    }
    for table, frame in tables.items():
        written.append(f"{folder}/{table}.tsv")
        change.write_bytes(written[-1], table_bytes(frame))
    size = PreparedSize(len(view.samples), len(view.names_measured), len(view.features), look.imputed_share)
    change.write_text(f"{folder}/preparation.md", account_page(preparation.account, name, size))
    with reporter.progress(f"figures of {name}"):
        written += write_drawings(change, folder, (*draw_look(look), *draw_preparation(preparation)))
    change.write_text(f"{folder}/reading.txt", "\n".join(reading) + "\n")
    reporter.say(f"  {reading[1] if len(reading) > 1 else reading[0]}")
    return written


def _look_between(state: ProjectState, change: Change, reporter: Reporter, names: list[str]) -> list[str]:
    views = [view_block(state, name) for name in names]
    with reporter.progress("agreement between blocks") as progress:
        look = look_between(views, seed=SEED, restriction=_restriction(state, names), progress=progress)
    reading = between_reading(look)
    change.write_bytes("results/look/agreement.tsv", table_bytes(between_table(look)))
    change.write_text("results/look/reading.txt", "\n".join(reading) + "\n")
    for line in reading:
        reporter.say(f"  {line}")
    return write_drawings(change, "results/look", draw_between(look))


def view_block(state: ProjectState, name: str) -> BlockView:
    """Return a block as it is looked at: prepared and measured values, and what the sheet says of its samples."""
    return block_view(state, load_block(state, name))


def block_view(state: ProjectState, block: LoadedBlock) -> BlockView:
    """Return a block that is at hand as it is looked at."""
    name = block.name
    frame = state.require_sheet().loc[list(block.samples)]
    own = block.run_columns.reindex(frame.index)
    frame = frame.drop(columns=[column for column in own if column in frame]).join(own)
    adjust = _adjust(state, name)
    measured = block.measured_rows(block.samples).values
    if block.settings.values == "intensities":
        measured = np.where(measured == 0, np.nan, measured)
    return BlockView(
        name=name,
        layer=block.layer,
        values=block.settings.values,
        samples=block.samples,
        features=block.features,
        prepared=block.values,
        columns=frame,
        imputed=block.imputed,
        measured=measured,
        measured_features=block.measured.features,
        kinds=state.settings.samples.kinds,
        groups=_groups(state, frame),
        adjust=adjust,
        shape_by=next((column for column in adjust if frame[column].nunique() <= len(frame) / 2), ""),
    )


def view_preparation(state: ProjectState, view: BlockView, shapes: Levels | None) -> PreparationLook:
    """Return what preparation did to a block; drift is taken away once more, to be seen run by run."""
    settings, measured = state.settings.blocks[view.name], measured_table(state, view.name)
    drift = None
    if measured.runs is not None:
        drift = drift_effect(
            recipe_for(settings.layer, settings.values, settings.prepare),
            measured,
            smallest_group=smallest_group(state, measured.samples),
            seed=PREPARE_SEED,
            among=set(view.features),
        )
    prepared = read_block(check_file(state.root, f"prepared/{view.name}.h5ad"))
    scale = prepared.obs["log2_scale"].to_numpy(dtype=np.float64)
    return look_at_preparation(view, scale, account_of(state, view.name), drift, shapes)


def _adjust(state: ProjectState, name: str) -> tuple[str, ...]:
    """Return the nuisance columns of the study and of one block, each once."""
    own = state.settings.blocks[name].adjust
    return tuple(dict.fromkeys([*own, *state.settings.samples.adjust]))


def _groups(state: ProjectState, frame: pd.DataFrame) -> Levels | None:
    """Return the groups of the samples; one with an empty cell in a factor belongs to none."""
    factors = factors_of(state.settings)
    if not factors:
        return None
    lacking = {sample for samples in missing_samples(frame, factors).values() for sample in samples}
    held = frame.loc[[sample for sample in frame.index if sample not in lacking]]
    if held.empty:
        return None
    groups = group_codes(held, factors, state.settings.samples.order)
    label = {sample: groups.levels[code] for sample, code in zip(held.index, groups.codes, strict=True)}
    return levels_of(" + ".join(factors), [label.get(sample, "") for sample in frame.index], groups.levels)


def _restriction(state: ProjectState, names: list[str]) -> Restriction | None:
    """Return the nuisance of all blocks, to be removed from both before samples are permuted."""
    sheet = state.require_sheet()
    design = design_frame(sheet, state.settings, [load_block(state, name) for name in names])
    lacking = design.lacking((), list(sheet.index))
    held = design.frame.loc[[sample for sample in sheet.index if sample not in lacking]]
    if not design.columns or held.empty:
        return None
    matrix = design_columns(held, design.columns, design.kinds).matrix
    samples = tuple(map(str, held.index))
    return Restriction(samples, columns=matrix, words=f"{', '.join(design.columns)} removed from both")
