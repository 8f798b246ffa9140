"""The third stage: what the layers of an analysis share, tested, cross-validated and accounted for."""

from __future__ import annotations

from collections.abc import Sequence

from workbench.store import Change, table_bytes
from workbench.workflow.analysis_view import blocks_of, factors_of, view_analysis
from workbench.workflow.fingerprints import block_header, columns_fingerprint, fingerprint
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState
from workbench.workflow.subjects import subject_columns

VERSION = 2
ENGINE_KEYS = ("blocks", "method", "ridge", "components", "folds", "repeats", "permutations", "seed", "level")
FILES = ("components.tsv", "explained.tsv", "association.tsv", "model.h5", "canonical.txt")


def integrating_stage(state: ProjectState, name: str) -> Stage:
    """Return the stage that integrates an analysis by its method, and writes model.h5 and its tables."""
    if state.settings.analyses[name].method == "multiblock_pls":
        from workbench.workflow.supervised import supervised_stage

        return supervised_stage(state, name)
    blocks = blocks_of(state.settings, name)
    return Stage(
        kind="integrate",
        subject=name,
        needs=tuple(f"prepare:{block}" for block in blocks),
        outputs=tuple(f"results/{name}/{file}" for file in FILES),
        inputs=lambda now: _inputs(now, name),
        work=lambda now, change, reporter: _work(now, change, reporter, name),
    )


def analysis_inputs(state: ProjectState, name: str) -> dict[str, str]:
    """Return the hashes of what the engine works on: values, design columns and its own settings."""
    settings = state.settings.analyses[name]
    blocks = blocks_of(state.settings, name)
    engine = {key: getattr(settings, key) for key in ENGINE_KEYS}
    columns = design_columns_of(state, blocks)
    hashes = {
        "settings of the analysis": fingerprint([VERSION, engine, blocks]),
        "design": fingerprint(
            [
                columns_fingerprint(state.require_sheet(), columns),
                state.settings.samples.order,
                state.settings.samples.kinds,
                factors_of(state.settings),
                {block: state.settings.blocks[block].adjust for block in blocks},
                state.settings.samples.subject,
                state.settings.samples.time,
            ]
        ),
        "run sheets": fingerprint(
            {block: state.manifest.files.get(state.settings.blocks[block].runs or "", "") for block in blocks}
        ),
        "layers": fingerprint({block: state.settings.blocks[block].layer for block in blocks}),
    }
    for block in blocks:
        header = block_header(state.paths.prepared_block(block))
        hashes[f"block {block}"] = fingerprint([header["content_sha256"], header["measured_sha256"]])
    return hashes


def design_columns_of(state: ProjectState, blocks: list[str]) -> list[str]:
    """Return the sample-sheet columns that the design of some blocks uses; others are of a run sheet."""
    columns = (
        factors_of(state.settings) + list(state.settings.samples.adjust) + subject_columns(state.settings)
    )
    for block in blocks:
        columns += state.settings.blocks[block].adjust
    return [column for column in dict.fromkeys(columns) if column in state.require_sheet()]


def _inputs(state: ProjectState, name: str) -> dict[str, str]:
    """Return what the stage depends on: that of any analysis, and the sheet that components are held against."""
    sheet = state.require_sheet()
    return {**analysis_inputs(state, name), "sample sheet": columns_fingerprint(sheet, list(sheet.columns))}


def _work(state: ProjectState, change: Change, reporter: Reporter, name: str) -> Sequence[str]:
    from workbench.figures.canonical import draw_canonical
    from workbench.workflow.canonical_drawings import canonical_view
    from workbench.workflow.canonical_fit import canonical_fit
    from workbench.workflow.canonical_tables import (
        association_table,
        components_table,
        explained_table,
        model_of,
    )
    from workbench.workflow.canonical_words import reading, summary
    from workbench.workflow.drawings import write_drawings
    from workbench.workflow.model_file import write_model

    fit = canonical_fit(view_analysis(state, name), reporter)
    folder = f"results/{name}"
    tables = {
        "components": components_table,
        "explained": explained_table,
        "association": association_table,
    }
    for file, table in tables.items():
        change.write_bytes(f"{folder}/{file}.tsv", table_bytes(table(fit)))
    write_model(change, f"{folder}/model.h5", model_of(fit))
    change.write_text(f"{folder}/canonical.txt", "\n".join(reading(fit)) + "\n")
    for line in summary(fit):
        reporter.say(f"  {line}")
    return write_drawings(change, f"{folder}/figures/canonical", draw_canonical(canonical_view(fit)))
