"""The command ``compare``: two analyses, of one project or of two."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from workbench.cli.console import answer, tell
from workbench.cli.options import ProjectOption, QuietOption, open_project

if TYPE_CHECKING:
    from workbench.store import ProjectPaths

A_SIDE = "An analysis of this project, the folder of another project, or FOLDER:ANALYSIS."


def register(app: typer.Typer) -> None:
    """Add the command to the program."""
    app.command("compare", epilog="Example: workbench compare main ../other_study:main --by symbol")(compare)


def compare(
    first: Annotated[str, typer.Argument(metavar="A", help=A_SIDE)],
    second: Annotated[str, typer.Argument(metavar="B", help=A_SIDE)],
    by: Annotated[
        str | None,
        typer.Option(
            metavar="COLUMN", help="Column of identifiers that matches features; default: the best one."
        ),
    ] = None,
    project: ProjectOption = None,
    quiet: QuietOption = False,
) -> None:
    """Compare two analyses: edges, communities, settings. Edges are kept, gained, lost, and changed or not."""
    from workbench.workflow.followup.comparing import run_compare

    comparison, folder = run_compare(_here(project), (first, second), by)
    answer(comparison.sentences())
    tell(f"tables and figure: {folder}", quiet=quiet)


def _here(project: Path | None) -> ProjectPaths | None:
    """Return the project of the option or of the working folder; None outside of any."""
    from workbench.errors import WorkbenchError

    if project is not None:
        return open_project(project).paths
    try:
        return open_project(None).paths
    except WorkbenchError:
        return None
