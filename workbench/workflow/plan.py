"""Which stages a command asks for, in the order in which they must run."""

from __future__ import annotations

from collections.abc import Sequence

from workbench.errors import InputError
from workbench.workflow.analysis_view import blocks_of
from workbench.workflow.canonical import has_canonical_pairs, integrating_stage
from workbench.workflow.checking import checking_stage
from workbench.workflow.looking import between_stage, looking_stage
from workbench.workflow.networking import networking_stage
from workbench.workflow.preparing import preparing_stage
from workbench.workflow.reading import reading_stage
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState


def all_stages(state: ProjectState, analyses: Sequence[str] = ()) -> list[Stage]:
    """Return every stage: of all blocks, the check, the look, and the named analyses or all of them."""
    for name in analyses:
        state.require_analysis(name)
    chosen = list(analyses) or list(state.settings.analyses)
    prepared, looked = block_stages(state), look_stages(state)
    looks = [stage for stage in looked if stage.kind == "look"]
    check = checking_stage(list(state.settings.blocks))
    return [*prepared, check, *looks, *_of_analyses(state, chosen, "integrate", "network")]


def check_stages(state: ProjectState) -> list[Stage]:
    """Return the stages up to the findings about the data."""
    return [*block_stages(state), checking_stage(list(state.settings.blocks))]


def block_stages(state: ProjectState, names: Sequence[str] = ()) -> list[Stage]:
    """Return reading and preparing of the named blocks, or of all."""
    for name in names:
        state.require_block(name)
    wanted = (
        [name for name in state.settings.blocks if name in names] if names else list(state.settings.blocks)
    )
    if not wanted:
        raise InputError(
            f"{state.paths.settings}: the project has no block yet; add one with "
            "`workbench add-block NAME FILE --layer LAYER --values VALUES`"
        )
    return [*map(reading_stage, wanted), *map(preparing_stage, wanted)]


def look_stages(state: ProjectState, names: Sequence[str] = ()) -> list[Stage]:
    """Return the stages up to the first look at the named blocks, or at all of them and between them."""
    stages = block_stages(state, names)
    wanted = [stage.subject for stage in stages if stage.kind == "prepare"]
    between = [between_stage(wanted)] if len(wanted) > 1 and len(wanted) == len(state.settings.blocks) else []
    return [*stages, *map(looking_stage, wanted), *between]


def integrate_stages(state: ProjectState, analyses: Sequence[str] = ()) -> list[Stage]:
    """Return the stages up to the canonical pairs of the named analyses, or of all."""
    chosen = list(analyses) or list(state.settings.analyses)
    return [*block_stages(state, _blocks_of_all(state, chosen)), *_of_analyses(state, chosen, "integrate")]


def network_stages(state: ProjectState, analyses: Sequence[str] = ()) -> list[Stage]:
    """Return the stages up to the network of the named analyses, or of all."""
    chosen = list(analyses) or list(state.settings.analyses)
    stages = _of_analyses(state, chosen, "integrate", "network")
    return [*block_stages(state, _blocks_of_all(state, chosen)), *stages]


def _blocks_of_all(state: ProjectState, analyses: Sequence[str]) -> list[str]:
    for name in analyses:
        state.require_analysis(name)
    if not analyses:
        raise InputError(
            f"{state.paths.settings}: the project has no analysis yet; the analysis 'main' is added with the "
            "second block (`workbench add-block`)"
        )
    return list(dict.fromkeys(block for name in analyses for block in blocks_of(state.settings, name)))


def _of_analyses(state: ProjectState, analyses: Sequence[str], *kinds: str) -> list[Stage]:
    stages = []
    for name in analyses:
        if "integrate" in kinds and has_canonical_pairs(state, name):
            stages.append(integrating_stage(state, name))
        if "network" in kinds:
            stages.append(networking_stage(state, name))
    return stages
