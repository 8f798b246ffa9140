"""A stage: what it depends on, what it writes, and whether what stands on disk is still its answer."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from typing import Any

from workbench.errors import InputError, WorkbenchError
from workbench.store import Change, ProjectPaths, StageRecord, project_lock, read_manifest, sha256_of
from workbench.workflow.reporting import Reporter
from workbench.workflow.state import ProjectState, load_state

NOT_DONE = "not done yet"
REFUSED = "cannot be done as things stand; `workbench check` says why"
REFUSED_KEY = "refusal of "
LARGEST_HASHED = 20_000_000


@dataclass(frozen=True)
class Stage:
    """One step for one block or analysis.

    ``inputs`` gives a hash for each thing that matters to the answer; ``work`` writes the files named in
    ``outputs`` through the change that it is handed, and returns the names of those that it wrote besides
    (figures that these data allow).  ``needs`` names the stages that come before; ``gate`` looks at the stage's
    answer, fresh or not, and stops a command that has more stages to run.  A ``tolerant`` stage runs also when a
    stage that it needs was refused: ``state.refused`` says why, and an input ``refusal of NAME`` keeps what led to it.
    """

    kind: str
    subject: str
    needs: tuple[str, ...]
    outputs: tuple[str, ...]
    inputs: Callable[[ProjectState], dict[str, str]]
    work: Callable[[ProjectState, Change, Reporter], Sequence[str] | None]
    gate: Callable[[ProjectState], None] | None = None
    tolerant: bool = False

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
        return NOT_DONE
    if not set(stage.outputs) <= set(record.outputs):
        return "its settings now ask for other files"
    for output in record.outputs:
        if not (state.root / output).exists():
            return f"{output} is missing"
        if changed_by_hand(state, output):
            return f"{output} was changed by hand"
    inputs = stage.inputs(state)
    changed = sorted(
        key for key in inputs.keys() | record.inputs.keys() if inputs.get(key) != record.inputs.get(key)
    )
    return "changed: " + ", ".join(changed) if changed else None


def changed_by_hand(state: ProjectState, output: str) -> bool:
    """Return whether a result of up to 20 MB is not what the program wrote.

    Blocks and larger files are held against their hash when they are read.
    """
    if not output.startswith("results/"):
        return False
    path, written = state.root / output, state.manifest.files.get(output)
    return written is not None and path.stat().st_size <= LARGEST_HASHED and sha256_of(path) != written


def standings(state: ProjectState, stages: Iterable[Stage]) -> list[Standing]:
    """Return where each stage stands, in order; a stage behind a stale one is stale as well.

    A stage that was refused, and would be again, is no reason for a tolerant one to wait.
    """
    found: dict[str, Standing] = {}
    for stage in stages:
        behind = [need for need in stage.needs if need in found and found[need].reason is not None]
        refused = _refused_before(state, stage)
        waits = [need for need in behind if need not in refused]
        reason = f"waits for {', '.join(waits)}" if waits else stale_reason(state, stage)
        if reason is None:
            found |= {need: Standing(found[need].stage, REFUSED) for need in behind}
        found[stage.name] = Standing(stage, reason)
    return list(found.values())


def _refused_before(state: ProjectState, stage: Stage) -> set[str]:
    """Return the stages that a tolerant stage had to do without when it last ran."""
    record = state.manifest.stages.get(stage.name)
    if record is None or not stage.tolerant:
        return set()
    return {key.removeprefix(REFUSED_KEY) for key in record.inputs if key.startswith(REFUSED_KEY)}


def run_stages(
    paths: ProjectPaths,
    command: str,
    choose: Callable[[ProjectState], list[Stage]],
    reporter: Reporter,
) -> Outcome:
    """Run the stale ones of the chosen stages in order, each committed whole, and keep one journal line.

    A stage whose inputs turn out unchanged once the stages before it have run is left alone. Where nothing is
    out of date nothing is written, and the project may be read-only, or in use.
    """
    outcome = _nothing_to_do(paths, choose)
    if outcome is not None:
        return outcome
    outcome = Outcome()
    with project_lock(paths.root, command):
        state = load_state(paths)
        with _journal(paths, command, outcome):
            _run_all(state, choose(state), outcome, reporter)
    return outcome


def _nothing_to_do(paths: ProjectPaths, choose: Callable[[ProjectState], list[Stage]]) -> Outcome | None:
    """Return the outcome of a command whose stages are all up to date; None when there is work."""
    state = load_state(paths)
    stages = choose(state)
    if any(one.reason is not None for one in standings(state, stages)):
        return None
    for stage in stages[:-1]:
        if stage.gate is not None:
            stage.gate(state)
    return Outcome(fresh=[stage.name for stage in stages])


def _run_all(state: ProjectState, stages: list[Stage], outcome: Outcome, reporter: Reporter) -> None:
    refused: dict[str, InputError] = {}
    for place, stage in enumerate(stages):
        behind = [need for need in stage.needs if need in refused]
        try:
            if behind and not stage.tolerant:
                raise refused[behind[0]]
            _run_one(state, stage, outcome, reporter)
        except InputError as error:
            if not any(later.tolerant for later in stages[place + 1 :]):
                raise
            refused[stage.name] = error
        manifest = read_manifest(state.root)
        state = replace(state, manifest=manifest, refused=dict(refused))
        if stage.gate is not None and stage is not stages[-1]:
            stage.gate(state)


def _run_one(state: ProjectState, stage: Stage, outcome: Outcome, reporter: Reporter) -> None:
    reason = stale_reason(state, stage)
    if reason is None:
        outcome.fresh.append(stage.name)
        return
    why = "for the first time" if reason == NOT_DONE else f"again, since {reason}"
    reporter.say(f"running {stage.kind} {stage.subject} {why}")
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
