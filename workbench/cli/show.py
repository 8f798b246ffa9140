"""The command that answers what is known of a feature or a pair."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from workbench.cli.console import answer, tell, tell_lines
from workbench.cli.options import JsonOption, ProjectOption, QuietOption, open_project

if TYPE_CHECKING:
    from pandas import DataFrame

    from workbench.workflow.network.showing import Story

MOST_PARTNERS = 20


def register(app: typer.Typer) -> None:
    """Add the command to the program."""
    app.command("show", epilog="Example: workbench show HvSUT1 sucrose")(show)


def show(
    features: Annotated[
        list[str],
        typer.Argument(
            metavar="FEATURE...", help="One feature for its partners, two or more for the pairs among them."
        ),
    ],
    analysis: Annotated[
        str | None,
        typer.Option("--analysis", metavar="NAME", help="Analysis; default: main, or the only one."),
    ] = None,
    figure: Annotated[
        Path | None,
        typer.Option(
            "--figure",
            metavar="FILE",
            help="Where the scatter of one pair goes (.svg or .png); default: results.",
        ),
    ] = None,
    project: ProjectOption = None,
    as_json: JsonOption = False,
    quiet: QuietOption = False,
) -> None:
    """Show the evidence for a feature or a pair. Partners, numbers, doubts, a scatter by group."""
    opened = open_project(project)
    stories = opened.show(*features, analysis=analysis, tell=tell_lines)
    if as_json:
        answer(
            [json.dumps({"schema_version": 1, "stories": [_as_json(story) for story in stories]}, indent=2)]
        )
    else:
        for story in stories:
            answer(_told(story))
    for path in opened.keep_figures(stories, analysis=analysis, file=figure):
        tell(f"figure: {path}", quiet=quiet)


def _told(story: Story) -> list[str]:
    lines = [story.title, *(f"  {line}" for line in story.lines)]
    lines += [f"  but: {line}" for line in story.doubts]
    if story.partners is not None and len(story.partners):
        lines += _partner_lines(story.partners)
    elif story.partners is None and not story.doubts:
        lines.append("  nothing that was looked at speaks against it" if "q" in story.numbers else "")
    return [line for line in lines if line]


def _partner_lines(partners: DataFrame) -> list[str]:
    listed = partners.head(MOST_PARTNERS).to_dict("records")
    wide, wide_block = (max(len(str(row[column])) for row in listed) for column in ("partner", "block"))
    lines = []
    for row in listed:
        doubts = f"; but {row['doubts']}" if row["doubts"] else ""
        ends = f"{row['partner']:<{wide}}  {row['block']:<{wide_block}}"
        lines.append(f"    {ends}  r = {row['r']:+.2f}, q = {row['q']:.2g}{doubts}")
    if len(partners) > MOST_PARTNERS:
        lines.append(f"    and {len(partners) - MOST_PARTNERS} more in edges.tsv")
    return lines


def _as_json(story: Story) -> dict[str, Any]:
    found: dict[str, Any] = {"title": story.title, "numbers": story.numbers, "reading": list(story.lines)}
    found["doubts"] = list(story.doubts)
    if story.partners is not None:
        found["partners"] = json.loads(story.partners.to_json(orient="records"))
    return found
