"""Options that several commands share, declared once."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

if TYPE_CHECKING:
    from workbench.project import Project

ProjectOption = Annotated[
    Path | None,
    typer.Option("--project", metavar="DIR", help="The project; default: this folder or one above it."),
]
QuietOption = Annotated[bool, typer.Option("--quiet", "-q", help="Print results and errors only.")]
JsonOption = Annotated[bool, typer.Option("--json", help="Answer as JSON on standard output.")]
AdjustOption = Annotated[
    list[str] | None,
    typer.Option(
        "--adjust", metavar="COLUMN", help="Nuisance column of the sample sheet (repeat for several)."
    ),
]
ReplaceOption = Annotated[
    bool, typer.Option("--replace", help="Put it in the place of what is there; what changes is shown first.")
]
AnalysesArgument = Annotated[
    list[str] | None, typer.Argument(metavar="[ANALYSIS]...", help="Analyses; default: all.")
]


def open_project(folder: Path | None) -> Project:
    """Return the project of the option, or of the working folder."""
    from workbench.errors import InputError
    from workbench.project import Project

    if folder is not None and not folder.is_dir():
        raise InputError(f"{folder}: no such folder; --project takes the folder that holds project.toml")
    return Project.open(folder or Path.cwd())
