"""Where a project stands: what is done, what is stale and why, and the next command to type."""

from __future__ import annotations

import shlex
from dataclasses import dataclass
from typing import Any

from workbench.workflow.choices import choices_of
from workbench.workflow.plan import all_stages
from workbench.workflow.stages import Standing, standings
from workbench.workflow.state import ProjectState


@dataclass(frozen=True)
class Status:
    """The standing of every stage, the choices that carry a reason, and the next command."""

    title: str
    samples: int | None
    group: tuple[str, ...]
    blocks: tuple[str, ...]
    analyses: tuple[str, ...]
    stages: tuple[Standing, ...]
    choices: tuple[str, ...]
    next_command: str

    def as_json(self) -> dict[str, Any]:
        """Return the status as plain values, for ``status --json``."""
        return {
            "schema_version": 1,
            "title": self.title,
            "samples": self.samples,
            "group": list(self.group),
            "blocks": list(self.blocks),
            "analyses": list(self.analyses),
            "stages": [
                {"stage": one.stage.name, "fresh": one.reason is None, "reason": one.reason}
                for one in self.stages
            ],
            "choices": list(self.choices),
            "next_command": self.next_command,
        }


def status_of(state: ProjectState) -> Status:
    """Return the status of a project; nothing is written."""
    settings = state.settings
    stages = standings(state, all_stages(state)) if settings.blocks and state.sheet is not None else []
    return Status(
        title=settings.study.title,
        samples=None if state.sheet is None else len(state.sheet),
        group=settings.samples.group,
        blocks=tuple(settings.blocks),
        analyses=tuple(settings.analyses),
        stages=tuple(stages),
        choices=choices_of(settings),
        next_command=next_command(state, stages),
    )


def next_command(state: ProjectState, stages: list[Standing]) -> str:
    """Return the command that takes the project one step further."""
    if state.sheet is None:
        return "workbench add-samples FILE --group COLUMN --adjust COLUMN"
    if len({block.layer for block in state.settings.blocks.values()}) < 2:
        return "workbench add-block NAME FILE --layer LAYER --values VALUES"
    if any(one.reason is not None for one in stages):
        return "workbench run"
    name = next(iter(state.settings.analyses), "main")
    return f"open {shlex.quote(f'results/{name}/network.graphml')} in a graph program, edges.tsv in a spreadsheet"
