"""The command ``check``."""

from __future__ import annotations

import json
from typing import Annotated

import typer

from workbench.cli.console import answer
from workbench.cli.options import JsonOption, ProjectOption, open_project


def register(app: typer.Typer) -> None:
    """Add the command to the program."""
    app.command("check", epilog="Example: workbench check --files")(check)


def check(
    files: Annotated[bool, typer.Option("--files", help="Every stored file against its hash.")] = False,
    project: ProjectOption = None,
    as_json: JsonOption = False,
) -> None:
    """Check the stored files against the hashes of what the program wrote."""
    from workbench.errors import InputError

    if not files:
        raise InputError(
            "say what to check: `workbench check --files` holds every stored file against its hash"
        )
    opened = open_project(project)
    faults = opened.check_files()
    if as_json:
        rows = [{"file": fault.file, "what": fault.fault, "todo": fault.way_out} for fault in faults]
        answer([json.dumps({"schema_version": 1, "faults": rows}, indent=1)])
    elif faults:
        answer(map(str, faults))
    else:
        count = len(opened.state().manifest.files)
        answer([f"{count} stored files are as the program wrote them"])
    if faults:
        raise typer.Exit(3)
