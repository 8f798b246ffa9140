"""The first stage: a kept table becomes a block, aligned to the sample sheet."""

from __future__ import annotations

from workbench.intake import BlockBuild, build_block
from workbench.settings import BlockSettings
from workbench.store import Change, write_block
from workbench.workflow.entry.sources import source_hash
from workbench.workflow.fingerprints import columns_fingerprint, fingerprint
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState

VERSION = 1
READING_KEYS = (
    *(
        "file",
        "layer",
        "values",
        "samples_in",
        "sheet",
        "array",
        "decimal",
        "annotations",
        "names",
        "runs",
        "swap",
    ),
)
BESIDE = ("annotations", "names", "runs")


def reading_stage(name: str) -> Stage:
    """Return the stage that builds ``blocks/NAME.h5ad`` from the kept table."""
    return Stage(
        kind="read",
        subject=name,
        needs=(),
        outputs=(block_file(name),),
        inputs=lambda state: reading_inputs(state, name),
        work=lambda state, change, reporter: _work(state, change, reporter, name),
    )


def block_file(name: str) -> str:
    """Return the project path of a measured block."""
    return f"blocks/{name}.h5ad"


def reading_inputs(state: ProjectState, name: str) -> dict[str, str]:
    """Return the hashes of all that decides what the block holds."""
    settings = state.settings.blocks[name]
    sheet = state.require_sheet()
    hashes = {
        "table": source_hash(state.paths, settings.file),
        "sample sheet": columns_fingerprint(sheet, list(sheet.columns)),
        "settings of the table": reading_settings(settings),
    }
    for key in BESIDE:
        file = getattr(settings, key)
        if file is not None:
            hashes[key] = source_hash(state.paths, file)
    return hashes


def reading_settings(settings: BlockSettings) -> str:
    """Return the hash of the keys that say how the table is read."""
    kept = settings.model_dump(mode="json", include=set(READING_KEYS))
    return fingerprint({"version": VERSION, **kept})


def write_built(change: Change, name: str, build: BlockBuild) -> None:
    """Write a built block through the change."""
    write_block(change.new_file(block_file(name)), build.adata)


def _work(state: ProjectState, change: Change, reporter: Reporter, name: str) -> None:
    build = build_block(state.settings.blocks[name], name, state.root, state.require_sheet())
    for line in build.lines:
        reporter.say(f"  {line}")
    write_built(change, name, build)
