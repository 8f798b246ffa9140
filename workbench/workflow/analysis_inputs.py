"""What the results of an analysis depend on, by hash: values, design and the settings of the engine."""

from __future__ import annotations

from workbench.workflow.analysis_view import blocks_of, factors_of
from workbench.workflow.fingerprints import block_header, columns_fingerprint, fingerprint
from workbench.workflow.state import ProjectState
from workbench.workflow.subjects import subject_columns

VERSION = 2
ENGINE_KEYS = ("blocks", "method", "ridge", "components", "folds", "repeats", "permutations", "seed", "level")


def analysis_inputs(state: ProjectState, name: str) -> dict[str, str]:
    """Return the hashes of what the engine works on: values, design columns and its own settings."""
    settings = state.settings.analyses[name]
    blocks = blocks_of(state.settings, name)
    engine = {key: getattr(settings, key) for key in ENGINE_KEYS}
    columns = used_columns(state, blocks)
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


def used_columns(state: ProjectState, blocks: list[str]) -> list[str]:
    """Return the sample-sheet columns that the design of some blocks uses; others are of a run sheet."""
    columns = (
        factors_of(state.settings) + list(state.settings.samples.adjust) + subject_columns(state.settings)
    )
    for block in blocks:
        columns += state.settings.blocks[block].adjust
    return [column for column in dict.fromkeys(columns) if column in state.require_sheet()]
