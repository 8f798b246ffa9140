"""Where a project stands: what is done, what is stale and why, and the next command to type."""

from __future__ import annotations

import shlex
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from workbench.workflow.analysis_view import blocks_of
from workbench.workflow.choices import choices_of
from workbench.workflow.entry.checking import open_errors
from workbench.workflow.plan import all_stages
from workbench.workflow.stages import Stage, Standing, standings
from workbench.workflow.state import ProjectState


@dataclass(frozen=True)
class Status:
    """The standing of every stage, errors of the last check that are open, choices with a reason, the next command."""

    title: str
    samples: int | None
    group: tuple[str, ...]
    blocks: tuple[str, ...]
    analyses: tuple[str, ...]
    stages: tuple[Standing, ...]
    choices: tuple[str, ...]
    next_command: str
    open_errors: tuple[str, ...] = ()

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
            "open_errors": list(self.open_errors),
            "choices": list(self.choices),
            "next_command": self.next_command,
        }


def status_of(state: ProjectState, analyses: Sequence[str] = ()) -> Status:
    """Return the status of a project, its next command about ``analyses`` where some are named; nothing is written."""
    settings = state.settings
    stages = standings(state, all_stages(state)) if settings.blocks and state.sheet is not None else []
    errors = _open_errors(state, stages)
    return Status(
        title=settings.study.title,
        samples=None if state.sheet is None else len(state.sheet),
        group=settings.samples.group,
        blocks=tuple(settings.blocks),
        analyses=tuple(settings.analyses),
        stages=tuple(stages),
        choices=choices_of(settings),
        next_command=next_command(state, stages, errors, analyses),
        open_errors=errors,
    )


def _open_errors(state: ProjectState, stages: list[Standing]) -> tuple[str, ...]:
    """Return the ids of the errors that the last check found and nobody accepted, while that check holds."""
    if not any(one.stage.kind == "check" and one.reason is None for one in stages):
        return ()
    return tuple(str(row["id"]) for row in open_errors(state))


def next_command(
    state: ProjectState, stages: list[Standing], errors: Sequence[str] = (), analyses: Sequence[str] = ()
) -> str:
    """Return the command that takes the project one step further."""
    if state.sheet is None:
        repeated = any(analysis.level is not None for analysis in state.settings.analyses.values())
        design = "--subject COLUMN --time COLUMN" if repeated else "--group COLUMN --adjust COLUMN"
        return f"workbench add-samples FILE {design}"
    if len({block.layer for block in state.settings.blocks.values()}) < 2:
        return "workbench add-block NAME FILE --layer LAYER --values VALUES"
    if errors:
        return f"settle {', '.join(errors)} as `workbench check` says, then workbench run"
    waiting = [one for one in stages if one.reason is not None and _concerns(state, one.stage, analyses)]
    if waiting:
        return " ".join(["workbench run", *analyses])
    name = next(iter([*analyses, *state.settings.analyses]), "main")
    folder = shlex.quote(f"results/{name}")
    return f"open {folder}/followup.tsv in a spreadsheet, {folder}/network.graphml in a graph program"


def _concerns(state: ProjectState, stage: Stage, analyses: Sequence[str]) -> bool:
    """Return whether a stage has to do with some analyses: it is theirs, of a block of theirs, or of all blocks."""
    if not analyses:
        return True
    blocks = {block for name in analyses for block in blocks_of(state.settings, name)}
    return stage.subject in analyses or stage.subject in blocks or stage.kind == "check"
