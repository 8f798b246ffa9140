"""Blocks that cannot be read or prepared as things stand: error findings, and what led to them."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from workbench.checks import Finding, finding_id, sorted_findings
from workbench.checks.kinds import CHECK as KIND
from workbench.errors import InputError
from workbench.prepare import PrepareRefusal
from workbench.prepare.refusal import VALUES
from workbench.workflow.entry.preparing import preparing_stage
from workbench.workflow.entry.reading import reading_stage
from workbench.workflow.fingerprints import fingerprint
from workbench.workflow.stages import REFUSED_KEY, Stage, stale_reason
from workbench.workflow.state import ProjectState

NOT_READ, NOT_PREPARED = "not_read", "not_prepared"


def refused_inputs(state: ProjectState, name: str) -> dict[str, str]:
    """Return what led to the refusal of a block, under the key of the stage; nothing for one that is prepared."""
    stages = _stages(name)
    if all(stage.name not in state.refused and stale_reason(state, stage) is None for stage in stages):
        return {}
    return {f"{REFUSED_KEY}prepare:{name}": fingerprint([stage.inputs(state) for stage in stages])}


def is_refused(state: ProjectState, name: str, kind: str) -> bool:
    """Return whether a block could not be read, or could not be prepared (or read): ``read``, ``prepare``."""
    return f"read:{name}" in state.refused or (kind == "prepare" and f"prepare:{name}" in state.refused)


def with_refusals(state: ProjectState, findings: Iterable[Finding]) -> tuple[Finding, ...]:
    """Return findings with an error for each block that could not be read or prepared.

    What the numbers of a block cannot be is told once: by its refusal, where that is about the kind of values.
    """
    refused = _refused_findings(state)
    kinds = {
        name
        for name in state.settings.blocks
        if isinstance(error := state.refused.get(f"prepare:{name}"), PrepareRefusal) and error.key == VALUES
    }
    others = [
        one for one in findings if not (one.check == KIND and one.severity == "error" and one.block in kinds)
    ]
    return sorted_findings([*refused, *others])


def _refused_findings(state: ProjectState) -> list[Finding]:
    found = []
    for name in state.settings.blocks:
        for stage, check in zip(_stages(name), (NOT_READ, NOT_PREPARED), strict=True):
            if stage.name in state.refused:
                found.append(_finding(check, name, state.refused))
                break
    return found


def _stages(name: str) -> tuple[Stage, Stage]:
    return reading_stage(name), preparing_stage(name)


def _finding(check: str, name: str, refused: Mapping[str, InputError]) -> Finding:
    error = refused[f"{'read' if check == NOT_READ else 'prepare'}:{name}"]
    what, todo = _parted(error)
    done = "read" if check == NOT_READ else "prepared"
    text = f"block '{name}' cannot be {done}: {what}"
    return Finding(finding_id(check, name), check, "error", name, text, (), (), todo, acceptable=False)


def _parted(error: InputError) -> tuple[str, str]:
    """Return what is wrong and what to do about it; the last part of a message is its way out."""
    if isinstance(error, PrepareRefusal):
        return error.reason, error.way_out
    what, _, todo = str(error).rpartition("; ")
    return (what, todo) if what else (todo, "")
