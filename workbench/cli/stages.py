"""Commands that run stages: ``prepare``, ``look``, ``integrate``, ``network`` and ``run``."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated

import typer

from workbench.cli.console import answer, tell, tell_next, terminal_reporter
from workbench.cli.options import AnalysesArgument, ProjectOption, QuietOption, open_project

if TYPE_CHECKING:
    from pandas import DataFrame

    from workbench.project import Project
    from workbench.workflow.stages import Outcome
    from workbench.workflow.status import Status

FOLLOWED = 3


def register(app: typer.Typer) -> None:
    """Add the commands to the program."""
    app.command("prepare", epilog="Example: workbench prepare rna")(prepare)
    app.command("look", epilog="Example: workbench look rna")(look)
    app.command("integrate", epilog="Example: workbench integrate main")(integrate)
    app.command("network", epilog="Example: workbench network main")(network)
    app.command("run", epilog="Example: workbench run --dry-run")(run)


def prepare(
    blocks: Annotated[
        list[str] | None, typer.Argument(metavar="[NAME]...", help="Blocks; default: all.")
    ] = None,
    explain: Annotated[
        bool, typer.Option("--explain", help="Say step by step what was done, why, and how to change it.")
    ] = False,
    project: ProjectOption = None,
    quiet: QuietOption = False,
) -> None:
    """Make values fit for linear methods, by each block's recipe."""
    opened = open_project(project)
    outcome = opened.prepare(*(blocks or ()), reporter=terminal_reporter(quiet or explain))
    if explain:
        for name in blocks or list(opened.state().settings.blocks):
            answer([f"block {name}", *opened.explain(name), ""])
    _close(outcome, opened.status(), quiet)


def look(
    blocks: Annotated[
        list[str] | None, typer.Argument(metavar="[NAME]...", help="Blocks; default: all.")
    ] = None,
    project: ProjectOption = None,
    quiet: QuietOption = False,
) -> None:
    """Look at each block on its own. Principal components, figures, tables, a reading in words."""
    opened = open_project(project)
    outcome = opened.look(*(blocks or ()), reporter=terminal_reporter(quiet))
    known = list(opened.state().settings.blocks)
    for name in blocks or known:
        answer([*opened.reading(name), f"figures: {opened.paths.look(name)}", ""])
    if not blocks and len(known) > 1:
        answer(opened.reading())
    _close(outcome, opened.status(), quiet)


def integrate(
    analyses: AnalysesArgument = None, project: ProjectOption = None, quiet: QuietOption = False
) -> None:
    """Find what layers share (or what tells an outcome), tested."""
    opened = open_project(project)
    outcome = opened.integrate(*(analyses or ()), reporter=terminal_reporter(quiet))
    _close(outcome, opened.status(*(analyses or ())), quiet)


def network(
    analyses: AnalysesArgument = None, project: ProjectOption = None, quiet: QuietOption = False
) -> None:
    """Build the network: tested edges, communities, GraphML."""
    opened = open_project(project)
    outcome = opened.network(*(analyses or ()), reporter=terminal_reporter(quiet))
    status = opened.status(*(analyses or ()))
    _summarise(opened, analyses or list(status.analyses), status)
    _close(outcome, status, quiet)


def run(
    analyses: AnalysesArgument = None,
    dry_run: Annotated[
        bool, typer.Option("--dry-run", help="Say what would run, and why; change nothing.")
    ] = False,
    project: ProjectOption = None,
    quiet: QuietOption = False,
) -> None:
    """Run every stage that is out of date, in order."""
    opened = open_project(project)
    if dry_run:
        answer(f"{one.stage.name}: {one.reason or 'up to date'}" for one in opened.plan(*(analyses or ())))
        return
    outcome = opened.run(*(analyses or ()), reporter=terminal_reporter(quiet))
    status = opened.status(*(analyses or ()))
    _summarise(opened, analyses or opened.ready_analyses(), status)
    _close(outcome, status, quiet)


def _summarise(project: Project, analyses: list[str], status: Status) -> None:
    from workbench.network import network_summary

    fresh = {one.stage.name for one in status.stages if one.reason is None}
    for analysis in analyses:
        result = project.result(analysis)
        folder = project.paths.analysis(analysis)
        answer([f"{analysis}:", *(f"  {line}" for line in network_summary(result.graph))])
        answer([f"  edges: {folder / 'edges.tsv'}", f"  network: {folder / 'network.graphml'}"])
        if f"pathways:{analysis}" in fresh:
            answer([f"  short list: {folder / 'followup.tsv'}", *_first_of_all(result.followup)])


def _first_of_all(followup: DataFrame) -> list[str]:
    """Return the head of the short list in sentences."""
    return [f"    {row.rank}. {row.sentence}" for row in followup.head(FOLLOWED).itertuples()]


def _close(outcome: Outcome, status: Status, quiet: bool) -> None:
    if not outcome.done:
        answer([f"nothing to do: {len(outcome.fresh)} stages are up to date"])
    else:
        tell(f"done: {', '.join(outcome.done)}", quiet=quiet)
    tell_next(status.next_command, quiet=quiet)
