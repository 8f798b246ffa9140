"""A stage: what it depends on, what it writes, and whether what stands on disk is still its answer."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from typing import Any

from workbench.errors import WorkbenchError
from workbench.store import Change, ProjectPaths, StageRecord, project_lock, read_manifest
from workbench.workflow.reporting import Reporter
from workbench.workflow.state import ProjectState, load_state


@dataclass(frozen=True)
class Stage:
    """One step for one block or analysis.

    ``inputs`` gives a hash for each thing that matters to the answer; ``work`` writes the files named in
    ``outputs`` through the change that it is handed, and returns the names of those that it wrote besides
    (figures that these data allow).  ``needs`` names the stages that come before; ``gate`` looks at the stage's
    answer, fresh or not, and stops a command that has more stages to run.
    """

    kind: str
    subject: str
    needs: tuple[str, ...]
    outputs: tuple[str, ...]
    inputs: Callable[[ProjectState], dict[str, str]]
    work: Callable[[ProjectState, Change, Reporter], Sequence[str] | None]
    gate: Callable[[ProjectState], None] | None = None

    @property
    def name(self) -> str:
        """Return ``kind:subject``, the key of the stage's record."""
        return f"{self.kind}:{self.subject}"


@dataclass(frozen=True)
class Standing:
    """Where a stage stands: fresh (``reason`` None) or stale, with the reason in words."""

    stage: Stage
    reason: str | None


@dataclass
class Outcome:
    """Names of the stages that ran and of those that were up to date."""

    done: list[str] = field(default_factory=list)
    fresh: list[str] = field(default_factory=list)


def stale_reason(state: ProjectState, stage: Stage) -> str | None:
    """Return why the stage must run again, or None when its files are the answer to today's inputs."""
    record = state.manifest.stages.get(stage.name)
    if record is None:
        return "not done yet"
    if not set(stage.outputs) <= set(record.outputs):
        return "it now writes other files"
    for output in record.outputs:
        if not (state.root / output).exists():
            return f"{output} is missing"
    inputs = stage.inputs(state)
    changed = sorted(
        key for key in inputs.keys() | record.inputs.keys() if inputs.get(key) != record.inputs.get(key)
    )
    return "changed: " + ", ".join(changed) if changed else None


def standings(state: ProjectState, stages: Iterable[Stage]) -> list[Standing]:
    """Return where each stage stands, in order; a stage behind a stale one is stale as well."""
    found: list[Standing] = []
    stale: set[str] = set()
    for stage in stages:
        waits = [need for need in stage.needs if need in stale]
        reason = f"waits for {', '.join(waits)}" if waits else stale_reason(state, stage)
        if reason is not None:
            stale.add(stage.name)
        found.append(Standing(stage, reason))
    return found


def run_stages(
    paths: ProjectPaths,
    command: str,
    choose: Callable[[ProjectState], list[Stage]],
    reporter: Reporter,
) -> Outcome:
    """Run the stale ones of the chosen stages in order, each committed whole, and keep one journal line.

    A stage whose inputs turn out unchanged once the stages before it have run is left alone.
    """
    outcome = Outcome()
    with project_lock(paths.root, command):
        state = load_state(paths)
        with _journal(paths, command, outcome):
            stages = choose(state)
            for stage in stages:
                _run_one(state, stage, outcome, reporter)
                state = replace(state, manifest=read_manifest(paths.root))
                if stage.gate is not None and stage is not stages[-1]:
                    stage.gate(state)
    return outcome


def _run_one(state: ProjectState, stage: Stage, outcome: Outcome, reporter: Reporter) -> None:
    reason = stale_reason(state, stage)
    if reason is None:
        outcome.fresh.append(stage.name)
        return
    reporter.say(f"{stage.kind} {stage.subject} ({reason})")
    with Change(state.root) as change:
        inputs = stage.inputs(state)
        outputs = (*stage.outputs, *(stage.work(state, change, reporter) or ()))
        _remove_old(state, change, stage.name, outputs)
        change.record_stage(stage.name, StageRecord(inputs=inputs, outputs=outputs))
        change.commit()
    outcome.done.append(stage.name)


def _remove_old(state: ProjectState, change: Change, name: str, outputs: tuple[str, ...]) -> None:
    """Take away what the stage wrote the last time and does not write any more."""
    before = state.manifest.stages.get(name)
    for old in set(before.outputs if before else ()) - set(outputs):
        if (state.root / old).exists():
            change.remove(old)


@contextmanager
def _journal(paths: ProjectPaths, command: str, outcome: Outcome) -> Iterator[None]:
    line: dict[str, Any] = {"command": command}
    try:
        yield
    except WorkbenchError as error:
        line["stopped"] = str(error)
        raise
    except KeyboardInterrupt:
        line["stopped"] = "interrupted"
        raise
    finally:
        if outcome.done:
            with Change(paths.root) as change:
                change.commit({**line, "stages": list(outcome.done)})
