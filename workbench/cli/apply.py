"""The command ``apply``: an analysis on another project's samples."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from workbench.cli.console import answer, tell_next
from workbench.cli.options import JsonOption, ProjectOption, QuietOption, open_project

if TYPE_CHECKING:
    from workbench.workflow.supervised.applying import Applied


def register(app: typer.Typer) -> None:
    """Add the command to the program."""
    app.command("apply", epilog="Example: workbench apply main --to ../second_cohort")(apply)


def apply(
    analysis: Annotated[str, typer.Argument(metavar="ANALYSIS", help="The analysis of this project.")],
    to: Annotated[Path, typer.Option("--to", metavar="DIR", help="The other project, its blocks prepared.")],
    as_json: JsonOption = False,
    project: ProjectOption = None,
    quiet: QuietOption = False,
) -> None:
    """Apply an analysis to another project's samples. Predictions, their figures, edges that replicate."""
    from workbench.workflow.supervised.applying import applied_folder, apply_analysis

    opened = open_project(project)
    applied = apply_analysis(opened.paths, analysis, to)
    folder = opened.paths.root / applied_folder(analysis, applied.other)
    if as_json:
        answer([_as_json(applied)])
        return
    answer(applied.lines)
    answer([f"tables: {folder}"])
    tell_next(opened.status().next_command, quiet=quiet)


def _as_json(applied: Applied) -> str:
    import json

    tables = {
        name: None if table is None else json.loads(table.to_json(orient="records", double_precision=12))
        for name, table in (
            ("predictions", applied.predictions),
            ("performance", applied.performance),
            ("missing", applied.missing),
            ("shifted", applied.shifted),
            ("edges", applied.edges),
        )
    }
    told = {"schema_version": 1, "other": applied.other, "sentences": list(applied.lines), **tables}
    return json.dumps(told, indent=1, ensure_ascii=False)
