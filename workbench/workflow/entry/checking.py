"""The stage ``check``: findings about the data, and the gate that an unaccepted error closes."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from workbench.checks import Finding, run_checks, study_data
from workbench.errors import FindingsError
from workbench.figures.findings import draw_findings
from workbench.store import Change, check_file, json_bytes, read_block, sha256_of, table_bytes
from workbench.store.journal import source_hashes
from workbench.workflow.drawings import write_drawings
from workbench.workflow.entry.refusals import is_refused, refused_inputs, with_refusals
from workbench.workflow.fingerprints import block_header, columns_fingerprint, fingerprint
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState
from workbench.workflow.tables import measured_block

VERSION = 5
SEED = 20260101
FOLDER = "results/check"
RECORD = f"{FOLDER}/findings.json"
SCHEMA_VERSION = 1
SPARE_ENDINGS = (".tsv", ".csv", ".txt")
LARGEST_SPARE = 5_000_000


def checking_stage(names: Sequence[str]) -> Stage:
    """Return the stage that writes ``results/check/``, over all blocks of the project."""
    return Stage(
        kind="check",
        subject="data",
        needs=tuple(f"prepare:{name}" for name in names),
        outputs=(f"{FOLDER}/findings.tsv", RECORD),
        inputs=lambda state: _inputs(state, names),
        work=lambda state, change, reporter: _work(state, change, reporter, names),
        gate=refuse_errors,
        tolerant=True,
    )


def _inputs(state: ProjectState, names: Sequence[str]) -> dict[str, str]:
    sheet, settings = state.require_sheet(), state.settings
    hashes = {
        "sample sheet": columns_fingerprint(sheet, list(sheet.columns)),
        "settings": fingerprint(
            [
                VERSION,
                settings.samples.model_dump(mode="json"),
                {name: settings.blocks[name].model_dump(mode="json") for name in names},
            ]
        ),
    }
    hashes |= {f"spare table {path.name}": sha256_of(path) for path in spare_files(state)}
    for name in names:
        refused = refused_inputs(state, name)
        if refused:
            hashes |= refused
            continue
        header = block_header(state.paths.prepared_block(name))
        hashes[f"block {name}"] = fingerprint([header["content_sha256"], header["measured_sha256"]])
    return hashes


def _work(state: ProjectState, change: Change, reporter: Reporter, names: Sequence[str]) -> list[str]:
    measured = {name: measured_block(state, name) for name in names if not is_refused(state, name, "read")}
    prepared = {
        name: read_block(check_file(state.root, f"prepared/{name}.h5ad"))
        for name in names
        if not is_refused(state, name, "prepare")
    }
    data = study_data(state.settings, state.require_sheet(), measured, prepared, spare_tables(state))
    found = with_refusals(state, run_checks(data, SEED))
    rows = [finding_row(finding) for finding in found]
    kept = [{**row, "acceptable": finding.acceptable} for row, finding in zip(rows, found, strict=True)]
    change.write_bytes(RECORD, json_bytes({"schema_version": SCHEMA_VERSION, "findings": kept}))
    change.write_bytes(f"{FOLDER}/findings.tsv", table_bytes(_table(rows)))
    accept = state.settings.check.accept
    for finding in found:
        reporter.say(f"  {heading_of(finding, accept)}: {finding.what}")
    drawings = draw_findings(found)
    return write_drawings(change, FOLDER, drawings) if drawings else []


def heading_of(finding: Finding, accept: Mapping[str, str]) -> str:
    """Return a finding's severity and id, and why it was accepted where it was."""
    heading = f"{finding.severity} {finding.id}"
    if finding.acceptable and finding.id in accept:
        return f"accepted {heading} ({accept[finding.id]})"
    return heading


def spare_files(state: ProjectState) -> list[Path]:
    """Return the text tables below ``source/`` that a person laid there: lists that may be used one day.

    A table that a command brought in is no such list, also when another has taken its place.
    """
    brought = source_hashes(state.root)
    used = {
        file
        for block in state.settings.blocks.values()
        for file in (block.file, block.names, block.runs, block.annotations)
    }
    found = sorted(state.paths.source.glob("*")) if state.paths.source.is_dir() else []
    return [
        path
        for path in found
        if path.suffix in SPARE_ENDINGS
        and state.paths.relative(path) not in used
        and state.paths.relative(path) not in brought
        and path.stat().st_size <= LARGEST_SPARE
    ]


def spare_tables(state: ProjectState) -> dict[str, pd.DataFrame]:
    """Return the cells of the spare tables as text; one that is no table is left alone."""
    tables = {}
    for path in spare_files(state):
        separator = "," if path.suffix == ".csv" else "\t"
        try:
            tables[path.name] = pd.read_csv(path, sep=separator, dtype=str, keep_default_na=False)
        except (ValueError, OSError):
            continue
    return tables


def finding_row(finding: Finding) -> dict[str, Any]:
    """Return a finding as plain values, under the keys of ``check --json``."""
    return {
        "id": finding.id,
        "check": finding.check,
        "severity": finding.severity,
        "block": finding.block,
        "what": finding.what,
        "samples": list(finding.samples),
        "features": list(finding.features),
        "todo": finding.todo,
    }


def _table(rows: list[dict[str, Any]]) -> pd.DataFrame:
    columns = ["severity", "check", "block", "what", "todo", "samples", "features", "id"]
    joined = [
        {**row, "samples": ", ".join(row["samples"]), "features": ", ".join(row["features"])} for row in rows
    ]
    return pd.DataFrame(joined, columns=columns)


def stored_findings(state: ProjectState) -> list[dict[str, Any]]:
    """Return the findings of the last check, each with ``accepted``: the reason, or None.

    An error with which no analysis can be made stays, whoever accepts it.
    """
    path = check_file(state.root, RECORD)
    rows: list[dict[str, Any]] = json.loads(path.read_text("utf-8"))["findings"]
    accept = state.settings.check.accept
    return [{**row, "accepted": accept.get(row["id"]) if row["acceptable"] else None} for row in rows]


def open_errors(state: ProjectState) -> list[dict[str, Any]]:
    """Return the error findings that nobody accepted."""
    return [row for row in stored_findings(state) if row["severity"] == "error" and row["accepted"] is None]


def refuse_errors(state: ProjectState) -> None:
    """Stop with `FindingsError` when the data have an error finding that nobody accepted."""
    errors = open_errors(state)
    if errors:
        lines = [f"{row['id']}: {row['what']}; {row['todo']}" for row in errors]
        raise FindingsError(
            f"the data have {len(errors)} error finding{'s' * (len(errors) > 1)}:\n"
            + "\n".join(f"  {line}" for line in lines)
            + f"\n{way_out_of(errors)}"
        )


def way_out_of(errors: Sequence[dict[str, Any]]) -> str:
    """Return what to do about error findings; acceptance is offered for those that an analysis can live with."""
    may = [row["id"] for row in errors if row["acceptable"]]
    if not may:
        return "do what each finding says: with such data no analysis can be made"
    only = "a finding" if len(may) == len(errors) else " or ".join(may)
    return (
        f'do what each finding says, or accept {only} in project.toml: [check] accept = {{ "ID" = "reason" }}'
    )
