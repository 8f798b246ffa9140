"""Commands about blocks: ``add-block``, ``export`` and ``remove-block``."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from workbench.cli.console import answer, answer_whole, tell_lines, tell_next
from workbench.cli.options import AdjustOption, ProjectOption, QuietOption, ReplaceOption, open_project

NameArgument = Annotated[
    str, typer.Argument(metavar="NAME", help="Name of the block: letters, digits, _ and -.")
]


def register(app: typer.Typer) -> None:
    """Add the commands to the program."""
    app.command(
        "add-block",
        epilog="Example: workbench add-block rna counts.tsv --layer transcripts --values counts --adjust rna_day",
    )(add_block)
    app.command("export", epilog="Example: workbench export rna --values measured > rna.tsv")(export)
    app.command("remove-block", epilog="Example: workbench remove-block rna")(remove_block)


def add_block(
    name: NameArgument,
    file: Annotated[Path, typer.Argument(metavar="FILE", help="TSV, CSV, XLSX, .h5ad or Parquet.")],
    layer: Annotated[
        str,
        typer.Option(
            metavar="LAYER",
            help="transcripts, metabolites, proteins, lipids, microbes, methylation, clinical, or your own.",
        ),
    ],
    values: Annotated[
        str,
        typer.Option(
            metavar="VALUES", help="counts, intensities, log, proportions, beta, continuous or mixed."
        ),
    ],
    own_layer: Annotated[
        bool, typer.Option("--own-layer", help="LAYER is a name of your own, though it is like a known one.")
    ] = False,
    samples_in: Annotated[
        str | None,
        typer.Option(metavar="rows|columns", help="Where the samples stand; default: found by name."),
    ] = None,
    annotations: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Table of feature ids and identifier columns.")
    ] = None,
    runs: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Run sheet: run, sample, role (sample|pool|blank), order, batch."),
    ] = None,
    sheet: Annotated[str | None, typer.Option(metavar="NAME", help="Sheet of an XLSX file.")] = None,
    array: Annotated[str | None, typer.Option(metavar="NAME", help="X or a layer of an .h5ad file.")] = None,
    decimal: Annotated[
        str | None, typer.Option(metavar=".|,", help="Decimal mark of numbers that are text; default: found.")
    ] = None,
    adjust: AdjustOption = None,
    accept_names: Annotated[
        bool, typer.Option("--accept-names", help="Use the names that nearly match, as they were offered.")
    ] = False,
    replace: ReplaceOption = False,
    project: ProjectOption = None,
    quiet: QuietOption = False,
) -> None:
    """Bring a delivered table in as a block. It is kept, read, and aligned to the sample sheet."""
    opened = open_project(project)
    lines = opened.add_block(
        name,
        file,
        layer=layer,
        values=values,
        own_layer=own_layer,
        samples_in=samples_in,
        annotations=annotations,
        sheet=sheet,
        array=array,
        decimal=decimal,
        adjust=adjust or (),
        runs=runs,
        accept_names=accept_names,
        replace=replace,
        tell=answer,
    )
    answer(lines)
    tell_next(opened.status().next_command, quiet=quiet)


def export(
    name: Annotated[str, typer.Argument(metavar="BLOCK", help="Name of the block.")],
    values: Annotated[str, typer.Option(metavar="measured|prepared", help="Which values.")] = "prepared",
    project: ProjectOption = None,
) -> None:
    """Print one block as a plain table (TSV), samples in rows."""
    from workbench.store import table_bytes

    table = open_project(project).export(name, values=values, tell=tell_lines)
    answer_whole(table_bytes(table).decode())


def remove_block(name: NameArgument, project: ProjectOption = None, quiet: QuietOption = False) -> None:
    """Take a block out of the project; its source stays."""
    opened = open_project(project)
    gone = opened.remove_block(name)
    answer([f"block '{name}' is out of the project; its delivered table stays in {opened.paths.source}"])
    if gone:
        answer([f"results that rested on it are out as well: {', '.join(gone)}"])
    tell_next(opened.status().next_command, quiet=quiet)
