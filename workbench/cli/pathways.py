"""The command ``pathways``: sets, known links, the short list, the figures of the network."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from workbench.cli.console import answer, tell, tell_next, terminal_reporter
from workbench.cli.options import AnalysesArgument, ProjectOption, QuietOption, open_project

if TYPE_CHECKING:
    from workbench.project import Project

LISTED = 5


def register(app: typer.Typer) -> None:
    """Add the command to the program."""
    app.command("pathways", epilog="Example: workbench pathways main --sets pathways.gmt")(pathways)


def pathways(
    analyses: AnalysesArgument = None,
    sets: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Sets of features: set, name, feature (.tsv), or .gmt; kept."),
    ] = None,
    links: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Known links: source, target, evidence (.tsv); kept.")
    ] = None,
    project: ProjectOption = None,
    quiet: QuietOption = False,
) -> None:
    """Follow the network: the short list, sets, known links. Over-representation, coherence and figures too."""
    from workbench.workflow.followup.knowledge import add_knowledge, pathways_stages
    from workbench.workflow.stages import run_stages

    opened = open_project(project)
    if sets is not None or links is not None:
        for line in add_knowledge(opened.paths, analyses or (), sets, links):
            tell(line, quiet=quiet)
    reporter = terminal_reporter(quiet)
    outcome = run_stages(
        opened.paths, "pathways", lambda state: pathways_stages(state, analyses or ()), reporter
    )
    _tell_lists(opened, analyses or list(opened.state().settings.analyses))
    if not outcome.done:
        answer([f"nothing to do: {len(outcome.fresh)} stages are up to date"])
    tell_next(opened.status().next_command, quiet=quiet)


def _tell_lists(project: Project, analyses: list[str]) -> None:
    """Print the head of each short list and where the tables are."""
    from workbench.store import check_file, read_table

    for name in analyses:
        folder = project.paths.analysis(name)
        table = read_table(check_file(project.paths.root, f"results/{name}/followup.tsv"))
        answer(
            [f"{name}: {len(table)} pairs to follow, the first of them:"]
            if len(table)
            else [f"{name}: no edges"]
        )
        answer(f"  {row.rank}. {row.sentence}" for row in table.head(LISTED).itertuples())
        files = [file for file in ("followup.tsv", "pathways.tsv", "figures") if (folder / file).exists()]
        answer(f"  {folder / file}" for file in files)
