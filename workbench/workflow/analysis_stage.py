"""A stage of one analysis: behind the preparation of its blocks, its files in the folder of its results."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from workbench.store import Change
from workbench.workflow.analysis_view import blocks_of
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState


def analysis_stage(
    state: ProjectState,
    name: str,
    kind: str,
    files: Sequence[str],
    inputs: Callable[[ProjectState, str], dict[str, str]],
    work: Callable[[ProjectState, Change, Reporter, str], Sequence[str]],
    behind: str = "",
) -> Stage:
    """Return a stage of an analysis; ``behind`` is the kind of the analysis's stage before it, if there is one."""
    prepared = tuple(f"prepare:{block}" for block in blocks_of(state.settings, name))
    return Stage(
        kind=kind,
        subject=name,
        needs=(*prepared, f"{behind}:{name}") if behind else prepared,
        outputs=tuple(f"results/{name}/{file}" for file in files),
        inputs=lambda now: inputs(now, name),
        work=lambda now, change, reporter: work(now, change, reporter, name),
    )
