"""Bringing a delivered table into the project as a block, and taking a block out."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import tomlkit
from anndata import AnnData

from workbench.checks.identifier_columns import texts_of
from workbench.errors import InputError, WorkbenchError
from workbench.intake import (
    build_block,
    difference,
    identifier_columns,
    missing_samples,
    names_table,
    offered_names,
    run_columns,
    run_columns_of,
    with_run_columns,
)
from workbench.prepare import recipe_for
from workbench.settings import (
    LAYERS,
    VALUES,
    BlockSettings,
    add_block_text,
    cross_check,
    hint,
    layer_fault,
    name_fault,
    nearest,
    parse_settings,
    read_settings_text,
)
from workbench.store import Change, ProjectPaths, StageRecord, project_lock, sha256_of, table_bytes
from workbench.workflow.entry.reading import BESIDE, reading_settings, reading_stage, write_built
from workbench.workflow.entry.sources import delivered_file, keep_source
from workbench.workflow.fingerprints import columns_fingerprint
from workbench.workflow.state import ProjectState, load_state
from workbench.workflow.tables import measured_block, table_of

OF_THE_TABLE = ("own_layer", "samples_in", "sheet", "array", "decimal", "names", "annotations", "runs")
NAMED = 6
Tell = Callable[[Sequence[str]], None]


def no_words(sentences: Sequence[str]) -> None:
    """Take sentences and say nothing."""
    del sentences


@dataclass(frozen=True)
class Delivery:
    """A table as it was delivered and what the analyst says of it; unset fields are found or left out."""

    name: str
    file: Path
    layer: str
    values: str
    own_layer: bool = False
    samples_in: str | None = None
    annotations: Path | None = None
    runs: Path | None = None
    sheet: str | None = None
    array: str | None = None
    decimal: str | None = None
    adjust: tuple[str, ...] = ()
    accept_names: bool = False
    replace: bool = False

    @property
    def beside(self) -> dict[str, Path]:
        """Return the files that come with the table, by their key in the settings."""
        return {key: path for key in ("annotations", "runs") if (path := getattr(self, key)) is not None}


def add_block(paths: ProjectPaths, delivery: Delivery, tell: Tell = no_words) -> tuple[str, ...]:
    """Keep the table, read and align it, write the block and its settings in one step.

    ``tell`` is called with what a replaced block changes, before anything is written.

    Returns
    -------
    tuple of str
        What was understood of the table, a sentence each.
    """
    _check_words(delivery)
    for file in (delivery.file, *delivery.beside.values()):
        delivered_file(file)
    with project_lock(paths.root, f"add-block {delivery.name}"):
        state = load_state(paths, replaced=delivery.name if delivery.replace else None)
        _require_fitting(state, delivery)
        with Change(paths.root) as change:
            return _take_in(state, change, delivery, tell)


def _check_words(delivery: Delivery) -> None:
    """Refuse a name, a layer and a kind of values that cannot be, all at once, by their options."""
    told = {"NAME": name_fault(delivery.name), "--layer": layer_fault(delivery.layer, delivery.own_layer)}
    allowed = {
        "values": (delivery.values, VALUES),
        "samples_in": (delivery.samples_in, ("rows", "columns")),
        "decimal": (delivery.decimal, (".", ",")),
    }
    for key, (given, choices) in allowed.items():
        if given is not None and given not in choices:
            listed = ", ".join(map(repr, choices))
            told[f"--{key.replace('_', '-')}"] = (
                f"{given!r} is not allowed; allowed: {listed}{hint(given, choices)}"
            )
    faults = [f"{option}: {fault}" for option, fault in told.items() if fault is not None]
    if faults:
        raise InputError("\n".join(faults))


def _take_in(state: ProjectState, change: Change, delivery: Delivery, tell: Tell) -> tuple[str, ...]:
    sheet, name = state.require_sheet(), delivery.name
    entries, sources = _keep(change, state.paths, delivery)
    text = read_settings_text(state.paths.settings)
    write = replaced_entries if delivery.replace else add_block_text
    declared = parse_settings(write(text, name, entries), state.paths.settings).blocks[name]
    there = {"file": delivery.file, **delivery.beside}
    declared = declared.model_copy(update={key: str(path.resolve()) for key, path in there.items()})
    if delivery.accept_names:
        declared = _accept_names(state, change, declared, entries, sources, name)
    build = build_block(declared, name, state.root, sheet)
    entries.update(build.chosen)
    text = write(text, name, entries)
    final = parse_settings(text, state.paths.settings).blocks[name]
    known = [*sheet.columns, *(run_columns(delivery.runs) if delivery.runs else ())]
    require_columns(final.adjust, known, state.paths.samples)
    _require_whole(state, text, name)
    if delivery.replace:
        tell(_changes(state, name, build.adata))
    write_built(change, name, build)
    change.write_text("project.toml", text)
    hashes = {source["file"]: source["sha256"] for source in sources}
    inputs = {
        "table": hashes[final.file],
        "sample sheet": columns_fingerprint(sheet, list(sheet.columns)),
        "settings of the table": reading_settings(final),
        **{key: hashes[file] for key in BESIDE if (file := getattr(final, key)) is not None},
    }
    stage = reading_stage(name)
    change.record_stage(stage.name, StageRecord(inputs=inputs, outputs=stage.outputs))
    change.commit({"command": "add-block", "block": name, "replaced": delivery.replace, "sources": sources})
    return (
        *build.decisions,
        *_identifier_line(build.adata),
        *_own_layer_line(final),
        *_empty_adjust(state, build.adata, final),
        *_cautions(state, name, build.adata, final),
    )


def _identifier_line(adata: AnnData) -> tuple[str, ...]:
    """Return what the feature ids and annotations are that are known here, and what is odd about them."""
    columns = identifier_columns(tuple(map(str, adata.var_names)), texts_of(adata.var))
    told = [column.sentence() for column in columns]
    return (f"identifiers: {'; '.join(told)}",) if told else ()


def _cautions(state: ProjectState, name: str, adata: AnnData, block: BlockSettings) -> list[str]:
    """Return why the table cannot be what it is declared to be, with the setting that mends it; nothing when it can."""
    table = table_of(adata, {**state.settings.samples.exclude, **block.exclude})
    refusal = recipe_for(block.layer, block.values, block.prepare).refusal(table)
    return [] if refusal is None else [f"caution: {refusal.at(name, block.file)}"]


def _empty_adjust(state: ProjectState, adata: AnnData, block: BlockSettings) -> list[str]:
    """Return a sentence for each nuisance column of the block that is empty for a sample which is not left out."""
    known = with_run_columns(adata)
    lacking = missing_samples(known, [column for column in block.adjust if column in known])
    without = {*state.settings.samples.exclude, *block.exclude}
    kept = {column: [name for name in names if name not in without] for column, names in lacking.items()}
    return [empty_cells_line(column, "adjust", names) for column, names in kept.items() if names]


def _own_layer_line(block: BlockSettings) -> tuple[str, ...]:
    """Return a sentence on a layer of the user's own; none for a known one."""
    if block.layer in LAYERS:
        return ()
    return (
        f"layer: '{block.layer}' is one of your own (known are {', '.join(LAYERS)}); its values are prepared "
        f"as any {block.values} are",
    )


def _require_whole(state: ProjectState, text: str, name: str) -> None:
    """Refuse a block with which the other settings would not hold any more, before anything is written."""
    sheet = state.require_sheet()
    columns = run_columns_of(state.settings.blocks, state.root)
    before, after = state.settings, parse_settings(text, state.paths.settings)
    known = set(cross_check(before, sheet, state.root, columns))
    own = f"project.toml: blocks.{name}."
    faults = [
        fault
        for fault in cross_check(after, sheet, state.root, columns)
        if fault not in known and not fault.startswith(own)
    ]
    if faults:
        raise InputError(
            f"{state.paths.settings}: with block '{name}' other settings do not hold any more; change them first, "
            "nothing was changed:\n  " + "\n  ".join(faults)
        )


def _changes(state: ProjectState, name: str, new: AnnData) -> Sequence[str]:
    """Return what a replaced block changes, where the old one is still there to be read."""
    try:
        old = measured_block(state, name)
    except WorkbenchError as error:
        return (f"what changes is not known, since the old block cannot be read ({error})",)
    return difference(old, new).lines()


def replaced_entries(text: str, name: str, entries: dict[str, Any]) -> str:
    """Return the settings with a block's entries exchanged.

    What says how the old table was read goes; ``exclude``, ``swap``, ``prepare`` and the like stay.
    """
    document = tomlkit.parse(text)
    block: Any = document["blocks"][name]
    for key in OF_THE_TABLE:
        if key in block and key not in entries:
            del block[key]
    for key, value in entries.items():
        block[key] = value
    return tomlkit.dumps(document)


def _accept_names(
    state: ProjectState,
    change: Change,
    declared: BlockSettings,
    entries: dict[str, Any],
    sources: list[dict[str, str]],
    name: str,
) -> BlockSettings:
    """Write the table of accepted names, and return the settings that use it; as they were without candidates."""
    match = offered_names(declared, state.root, state.require_sheet())
    if not match.candidates:
        return declared
    content = table_bytes(names_table(match))
    file = f"source/{name}_names.tsv"
    part = change.new_file(file)
    part.write_bytes(content)
    entries["names"] = file
    sources.append({"file": file, "sha256": sha256_of(part)})
    return declared.model_copy(update={"names": str(part)})


def require_columns(wanted: list[str] | tuple[str, ...], known: list[str], where: Path) -> None:
    """Refuse columns that the sample sheet does not have, naming those that it has."""
    lacking = [column for column in wanted if column not in known]
    if lacking:
        raise InputError(
            f"{where}: no column {', '.join(repr(column) + _meant(column, known) for column in lacking)} in the "
            f"sample sheet; it has {', '.join(map(repr, known))}"
        )


def _meant(column: str, known: list[str]) -> str:
    guess = nearest(column, known)
    return "" if guess is None else f" (did you mean {guess!r}?)"


def empty_cells_line(column: str, part: str, samples: list[str]) -> str:
    """Return the sentence on a column of the design whose cells are empty for some samples."""
    names = ", ".join(map(repr, samples[:NAMED])) + (
        f" and {len(samples) - NAMED} more" * (len(samples) > NAMED)
    )
    return (
        f"column '{column}' ({part}) is empty for {len(samples)} sample{'s' * (len(samples) > 1)}: {names}; such a "
        "sample takes no part in an analysis: fill the cell in samples.tsv, or leave the sample out with the reason "
        "(exclude)"
    )


def _keep(
    change: Change, paths: ProjectPaths, delivery: Delivery
) -> tuple[dict[str, Any], list[dict[str, str]]]:
    """Copy the table and what comes with it into ``source/``; return settings entries and journal entries."""
    entries: dict[str, Any] = {}
    sources = []
    for key, path in {"file": delivery.file, **delivery.beside}.items():
        entries[key], digest = keep_source(change, paths, path)
        sources.append({"file": entries[key], "sha256": digest, "delivered_as": path.name})
    entries |= {"layer": delivery.layer, "values": delivery.values}
    if delivery.own_layer:
        entries["own_layer"] = True
    for key in ("samples_in", "sheet", "array", "decimal"):
        if getattr(delivery, key) is not None:
            entries[key] = getattr(delivery, key)
    if delivery.adjust:
        entries["adjust"] = list(delivery.adjust)
    return entries, sources


def _require_fitting(state: ProjectState, delivery: Delivery) -> None:
    """Refuse a new block under a name that is taken, and a replaced one under a name that is not."""
    if delivery.replace:
        state.require_block(delivery.name)
    elif delivery.name in state.settings.blocks:
        raise InputError(
            f"{state.paths.settings}: block '{delivery.name}' is already there; say --replace to put this table in its "
            f"place, take it out with `workbench remove-block {delivery.name}`, or choose another name"
        )
