"""The command ``check``: findings about the data, and stored files against their hashes."""

from __future__ import annotations

import json
from collections import Counter
from typing import TYPE_CHECKING, Annotated, Any

import typer

from workbench.cli.console import answer, tell_next, terminal_reporter
from workbench.cli.options import JsonOption, ProjectOption, QuietOption, open_project

if TYPE_CHECKING:
    from workbench.project import Project

OWN_KEYS = ("accepted", "acceptable")


def register(app: typer.Typer) -> None:
    """Add the command to the program."""
    app.command("check", epilog="Example: workbench check --json")(check)


def check(
    files: Annotated[
        bool, typer.Option("--files", help="Every stored file against its hash instead.")
    ] = False,
    project: ProjectOption = None,
    as_json: JsonOption = False,
    quiet: QuietOption = False,
) -> None:
    """Find what is wrong with the data. Exit 1 when an error is not accepted."""
    opened = open_project(project)
    if files:
        _check_files(opened, as_json)
        return
    found = opened.check(reporter=terminal_reporter(True))
    if as_json:
        rows = [{key: value for key, value in row.items() if key not in OWN_KEYS} for row in found]
        answer([json.dumps({"schema_version": 1, "findings": rows}, indent=1, ensure_ascii=False)])
    else:
        answer(line for row in found for line in _lines(row))
        answer([_count(found)])
    tell_next(opened.status().next_command, quiet=quiet or as_json)
    if any(row["severity"] == "error" and row["accepted"] is None for row in found):
        raise typer.Exit(1)


def _lines(row: dict[str, Any]) -> list[str]:
    where = f" ({row['block']})" if row["block"] else ""
    settled = f"accepted: {row['accepted']}" if row["accepted"] is not None else row["todo"]
    first = f"{row['severity']} {row['id']}{where}: {row['what']}"
    return [first, f"   {settled}"] if settled else [first]


def _count(found: list[dict[str, Any]]) -> str:
    count = Counter(row["severity"] for row in found if row["accepted"] is None)
    accepted = sum(row["accepted"] is not None for row in found)
    text = ", ".join(
        f"{count[kind]} {kind}{'s' * (count[kind] != 1)}" for kind in ("error", "warning", "note")
    )
    return f"{text}; {accepted} accepted"


def _check_files(opened: Project, as_json: bool) -> None:
    faults = opened.check_files()
    if as_json:
        rows = [{"file": fault.file, "what": fault.fault, "todo": fault.way_out} for fault in faults]
        answer([json.dumps({"schema_version": 1, "faults": rows}, indent=1)])
    elif faults:
        answer(map(str, faults))
    else:
        stored = opened.state().manifest.files
        there = sum((opened.paths.root / file).exists() for file in stored)
        answer([f"{there} stored files are as the program wrote them"])
        if there < len(stored):
            answer([f"{len(stored) - there} that can be made again are missing; `workbench run` makes them"])
    if faults:
        raise typer.Exit(3)
