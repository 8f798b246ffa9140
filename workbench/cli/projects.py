"""Commands about a project as a whole: ``init`` and ``status``."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated

import typer

from workbench.cli.console import answer, tell_next
from workbench.cli.options import JsonOption, ProjectOption, QuietOption, open_project


def register(app: typer.Typer) -> None:
    """Add the commands to the program."""
    app.command("init", epilog='Example: workbench init barley --title "Barley under drought"')(init)
    app.command("status", epilog="Example: workbench status --json")(status)


def init(
    folder: Annotated[
        Path | None, typer.Argument(metavar="DIR", help="A new or empty folder.", show_default=False)
    ] = None,
    template: Annotated[
        str, typer.Option(metavar="NAME", help="Template; --list shows them.")
    ] = "two-layers",
    title: Annotated[str, typer.Option(metavar="TEXT", help="Title of the study.")] = "",
    show: Annotated[bool, typer.Option("--list", help="List the templates and stop.")] = False,
    quiet: QuietOption = False,
) -> None:
    """Make a project."""
    from workbench.errors import InputError
    from workbench.project import Project
    from workbench.workflow.entry.create import templates

    if show:
        answer(f"{one.name}\t{one.title}\t{one.about}" for one in templates().values())
        return
    if folder is None:
        raise InputError("DIR is missing: name a new or an empty folder, as in `workbench init my_study`")
    project = Project.create(folder, template=template, title=title)
    answer([f"made {project.paths.root}"])
    tell_next(f"cd {folder} && {project.status().next_command}", quiet=quiet)


def status(project: ProjectOption = None, as_json: JsonOption = False, quiet: QuietOption = False) -> None:
    """Say what is done, what is stale and why, what to type next."""
    found = open_project(project).status()
    if as_json:
        answer([json.dumps(found.as_json(), indent=1, ensure_ascii=False)])
        return
    samples = "no sample sheet" if found.samples is None else f"{found.samples} samples"
    group = f", group: {' + '.join(found.group)}" if found.group else ""
    answer(
        [f"{found.title or 'untitled study'}: {samples}{group}, blocks: {', '.join(found.blocks) or 'none'}"]
    )
    answer(f"  {one.stage.name}: {one.reason or 'up to date'}" for one in found.stages)
    answer(f"  open error: {one} (`workbench check` says what to do)" for one in found.open_errors)
    answer(f"  {choice}" for choice in found.choices)
    tell_next(found.next_command, quiet=quiet)
