"""The third stage: an analysis is integrated by its method."""

from __future__ import annotations

from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState


def integrating_stage(state: ProjectState, name: str) -> Stage:
    """Return the stage that fits and tests an analysis; only what its method needs is imported."""
    if state.settings.analyses[name].method == "multiblock_pls":
        from workbench.workflow.supervised.supervised import supervised_stage

        return supervised_stage(state, name)
    from workbench.workflow.canonical.canonical import canonical_stage

    return canonical_stage(state, name)
