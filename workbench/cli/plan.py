"""The command that says what a design can find, before the study or for the project at hand."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from workbench.cli.console import answer, terminal_reporter
from workbench.cli.options import JsonOption, ProjectOption, open_project

if TYPE_CHECKING:
    from workbench.project import Project


def register(app: typer.Typer) -> None:
    """Add the command to the program."""
    app.command(
        "plan", epilog="Example: workbench plan --samples 12 --features 20000 --features 500 --taken 1"
    )(plan)


def plan(
    samples: Annotated[
        int | None, typer.Option("--samples", metavar="N", help="Samples; default: those of the project.")
    ] = None,
    features: Annotated[
        list[int] | None,
        typer.Option("--features", metavar="N", help="Features of a layer (repeat: one for each layer)."),
    ] = None,
    taken: Annotated[
        int,
        typer.Option(
            "--taken",
            metavar="N",
            min=0,
            help="Samples that groups and batches take: one for each beyond the first.",
        ),
    ] = 0,
    fdr: Annotated[float, typer.Option("--fdr", metavar="RATE", help="False-discovery rate.")] = 0.05,
    share: Annotated[
        float, typer.Option("--share", metavar="S", help="Share of all pairs that are taken to be true.")
    ] = 0.001,
    power: Annotated[
        float, typer.Option("--power", metavar="P", help="Chance to find a pair of the smallest size.")
    ] = 0.8,
    analysis: Annotated[
        str | None, typer.Option("--analysis", metavar="NAME", help="Analysis of the project; default: main.")
    ] = None,
    project: ProjectOption = None,
    as_json: JsonOption = False,
) -> None:
    """Say what a design can find. The smallest correlation, and the samples that a weaker one needs."""
    from workbench.workflow.analysis_view import blocks_of
    from workbench.workflow.network.planning import plan_of_numbers, project_plans

    if features:
        from workbench.errors import InputError

        if samples is None:
            raise InputError("--features are of a study that is not there yet; say its --samples too")
        plans = plan_of_numbers(samples, features, taken=taken, fdr=fdr, share=share, power=power)
    else:
        opened = _project_at_hand(project)
        state = opened.state()
        name = state.one_analysis(analysis)
        opened.prepare(*blocks_of(state.settings, name), reporter=terminal_reporter(as_json))
        plans = project_plans(opened.state(), name, share=share, power=power, samples=samples)
    if as_json:
        answer([json.dumps({"schema_version": 1, "plans": [one.as_json() for one in plans]}, indent=2)])
    else:
        answer(line for one in plans for line in one.lines())


def _project_at_hand(folder: Path | None) -> Project:
    """Return the project, or say that a study without one is planned from numbers."""
    from workbench.errors import InputError

    try:
        return open_project(folder)
    except InputError as error:
        raise InputError(f"{error}; before there is a project, give --samples and --features") from error
