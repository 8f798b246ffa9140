"""Bringing a delivered table into the project as a block, and taking a block out."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from workbench.errors import InputError
from workbench.intake import build_block
from workbench.settings import (
    BlockSettings,
    add_block_text,
    check_name,
    parse_settings,
    read_settings_text,
    remove_block_text,
)
from workbench.store import Change, ProjectPaths, StageRecord, project_lock
from workbench.workflow.fingerprints import columns_fingerprint
from workbench.workflow.reading import block_file, reading_settings, reading_stage, write_built
from workbench.workflow.sources import delivered_file, keep_source
from workbench.workflow.state import ProjectState, load_state


@dataclass(frozen=True)
class Delivery:
    """A table as it was delivered and what the analyst says of it; unset fields are found or left out."""

    name: str
    file: Path
    layer: str
    values: str
    samples_in: str | None = None
    annotations: Path | None = None
    sheet: str | None = None
    array: str | None = None
    adjust: tuple[str, ...] = ()


def add_block(paths: ProjectPaths, delivery: Delivery) -> tuple[str, ...]:
    """Keep the table, read and align it, write the block and its settings in one step.

    Returns
    -------
    tuple of str
        What was understood of the table, a sentence each.
    """
    check_name(delivery.name, "block")
    delivered_file(delivery.file)
    if delivery.annotations is not None:
        delivered_file(delivery.annotations)
    with project_lock(paths.root, f"add-block {delivery.name}"):
        state = load_state(paths)
        _require_new(state, delivery.name)
        with Change(paths.root) as change:
            return _take_in(state, change, delivery)


def _take_in(state: ProjectState, change: Change, delivery: Delivery) -> tuple[str, ...]:
    sheet = state.require_sheet()
    entries, sources = _keep(change, state.paths, delivery)
    text = read_settings_text(state.paths.settings)
    settings = parse_settings(add_block_text(text, delivery.name, entries), state.paths.settings)
    declared = replace_block(settings.blocks[delivery.name], file=str(delivery.file.resolve()))
    if delivery.annotations is not None:
        declared = replace_block(declared, annotations=str(delivery.annotations.resolve()))
    build = build_block(declared, delivery.name, state.root, sheet)
    entries["samples_in"] = json.loads(build.adata.uns["workbench"])["samples_in"]
    text = add_block_text(text, delivery.name, entries)
    final = parse_settings(text, state.paths.settings)
    require_columns(final.blocks[delivery.name].adjust, list(sheet.columns), state.paths.samples)
    write_built(change, delivery.name, build)
    change.write_text("project.toml", text)
    inputs = {
        "table": sources[0]["sha256"],
        "sample sheet": columns_fingerprint(sheet, list(sheet.columns)),
        "settings of the table": reading_settings(final.blocks[delivery.name]),
    }
    if delivery.annotations is not None:
        inputs["annotations"] = sources[1]["sha256"]
    stage = reading_stage(delivery.name)
    change.record_stage(stage.name, StageRecord(inputs=inputs, outputs=stage.outputs))
    change.commit({"command": "add-block", "block": delivery.name, "sources": sources})
    return build.lines


def replace_block(settings: BlockSettings, **changes: Any) -> BlockSettings:
    """Return a copy of a block's settings with some values exchanged, unchecked."""
    return settings.model_copy(update=changes)


def require_columns(wanted: list[str] | tuple[str, ...], known: list[str], where: Path) -> None:
    """Refuse columns that the sample sheet does not have, naming those that it has."""
    lacking = [column for column in wanted if column not in known]
    if lacking:
        raise InputError(
            f"{where}: no column {', '.join(map(repr, lacking))} in the sample sheet; it has "
            f"{', '.join(map(repr, known))}"
        )


def _keep(
    change: Change, paths: ProjectPaths, delivery: Delivery
) -> tuple[dict[str, Any], list[dict[str, str]]]:
    file, digest = keep_source(change, paths, delivery.file)
    sources = [{"file": file, "sha256": digest, "delivered_as": delivery.file.name}]
    entries: dict[str, Any] = {"file": file, "layer": delivery.layer, "values": delivery.values}
    for key in ("samples_in", "sheet", "array"):
        if getattr(delivery, key) is not None:
            entries[key] = getattr(delivery, key)
    if delivery.annotations is not None:
        kept, digest = keep_source(change, paths, delivery.annotations)
        entries["annotations"] = kept
        sources.append({"file": kept, "sha256": digest, "delivered_as": delivery.annotations.name})
    if delivery.adjust:
        entries["adjust"] = list(delivery.adjust)
    return entries, sources


def _require_new(state: ProjectState, name: str) -> None:
    if name in state.settings.blocks:
        raise InputError(
            f"{state.paths.settings}: block '{name}' is already there; take it out with "
            f"`workbench remove-block {name}`, or choose another name"
        )


def remove_block(paths: ProjectPaths, name: str) -> None:
    """Take a block, what was prepared from it and its settings out; its source stays."""
    check_name(name, "block")
    with project_lock(paths.root, f"remove-block {name}"):
        state = load_state(paths)
        state.require_block(name)
        with Change(paths.root) as change:
            change.write_text("project.toml", remove_block_text(read_settings_text(paths.settings), name))
            for relative in (block_file(name), f"prepared/{name}.h5ad"):
                if (paths.root / relative).exists():
                    change.remove(relative)
            for kind in ("read", "prepare"):
                if f"{kind}:{name}" in state.manifest.stages:
                    change.forget_stage(f"{kind}:{name}")
            change.commit({"command": "remove-block", "block": name})
