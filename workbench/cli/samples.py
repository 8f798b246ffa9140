"""Commands about the sample sheet."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from workbench.cli.console import answer, tell, tell_next
from workbench.cli.options import AdjustOption, ProjectOption, QuietOption, ReplaceOption, open_project

if TYPE_CHECKING:
    from workbench.workflow.entry.samples import SheetAccount


def register(app: typer.Typer) -> None:
    """Add the commands to the program."""
    app.command(
        "add-samples", epilog="Example: workbench add-samples plants.xlsx --group condition --adjust batch"
    )(add_samples)


def add_samples(
    file: Annotated[Path, typer.Argument(metavar="FILE", help="Sample sheet: TSV, CSV or XLSX.")],
    id_column: Annotated[
        str | None,
        typer.Option("--id", metavar="COLUMN", help="Column that names the sample; default: the first."),
    ] = None,
    group: Annotated[
        list[str] | None,
        typer.Option(
            "--group", metavar="COLUMN", help="Factor of interest (repeat: the cells are the groups)."
        ),
    ] = None,
    subject: Annotated[
        str | None,
        typer.Option(
            "--subject", metavar="COLUMN", help="Column that tells which samples are of one subject."
        ),
    ] = None,
    time: Annotated[
        str | None,
        typer.Option("--time", metavar="COLUMN", help="Column that orders the samples of one subject."),
    ] = None,
    adjust: AdjustOption = None,
    replace: ReplaceOption = False,
    project: ProjectOption = None,
    quiet: QuietOption = False,
) -> None:
    """Import the sample sheet: one row per biological sample."""
    opened = open_project(project)
    account = opened.add_samples(
        file,
        id=id_column,
        group=group or (),
        subject=subject,
        time=time,
        adjust=adjust or (),
        replace=replace,
        tell=answer,
    )
    answer([f"{account.samples} samples in {opened.paths.samples}"])
    for line in _told(account):
        tell(line, quiet=quiet)
    tell_next(opened.status().next_command, quiet=quiet)


def _told(account: SheetAccount) -> list[str]:
    lines = list(account.notes)
    for column, kind in account.kinds.items():
        lines.append(
            f"column '{column}' holds few whole numbers and is taken as {kind}; if it is a measure, write "
            f'kinds = {{ {column} = "number" }} under [samples] in project.toml'
        )
    if account.suggestions is None:
        return lines
    found = account.suggestions
    for key, columns in (("group", found.group), ("adjust", found.adjust)):
        lines += [
            f"column '{column}' looks like a candidate for {key} ({found.reasons[column]}); to use it, write "
            f'{key} = ["{column}"] under [samples] in project.toml'
            for column in columns
        ]
    lines += [
        f"column '{column}' looks like the subject ({found.reasons[column]}); to use it, write "
        f'subject = "{column}" under [samples] in project.toml'
        for column in found.subject
    ]
    return lines
