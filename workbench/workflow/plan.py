"""Which stages a command asks for, in the order in which they must run."""

from __future__ import annotations

from collections.abc import Sequence

from workbench.errors import InputError
from workbench.workflow.analysis_view import blocks_of
from workbench.workflow.entry.checking import checking_stage
from workbench.workflow.entry.looking import between_stage, looking_stage
from workbench.workflow.entry.preparing import preparing_stage
from workbench.workflow.entry.reading import reading_stage
from workbench.workflow.followup.following import following_stage
from workbench.workflow.integrating import integrating_stage
from workbench.workflow.network.networking import networking_stage
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState


def all_stages(state: ProjectState, analyses: Sequence[str] = ()) -> list[Stage]:
    """Return every stage: of all blocks, the check, the look, and the named analyses or all that can run."""
    chosen = _checked(state, analyses) if analyses else analyses_that_can_run(state)
    prepared, looked = block_stages(state), look_stages(state)
    looks = [stage for stage in looked if stage.kind == "look"]
    check = checking_stage(list(state.settings.blocks))
    return [*prepared, check, *looks, *_of_analyses(state, chosen, "integrate", "network", "pathways")]


def analyses_that_can_run(state: ProjectState) -> list[str]:
    """Return the analyses whose blocks are of two layers at least."""
    return [name for name in state.settings.analyses if len(_layers(state, name)) > 1]


def _layers(state: ProjectState, analysis: str) -> set[str]:
    return {state.settings.blocks[block].layer for block in blocks_of(state.settings, analysis)}


def _checked(state: ProjectState, analyses: Sequence[str]) -> list[str]:
    """Return the named analyses, or all; refuse unknown ones and those without two layers."""
    state.require_sheet()
    chosen = list(analyses) or list(state.settings.analyses)
    if not chosen:
        raise InputError(
            f"{state.paths.settings}: the project has no analysis yet; the analysis 'main' is added with the "
            "second block (`workbench add-block`)"
        )
    for name in chosen:
        state.require_analysis(name)
        layers = _layers(state, name)
        if len(layers) < 2:
            raise InputError(
                f"{state.paths.settings}: analysis '{name}' has blocks of one layer ({', '.join(layers)}); a "
                "cross-layer network needs two: add a block of another layer with `workbench add-block`"
            )
    return chosen


def check_stages(state: ProjectState) -> list[Stage]:
    """Return the stages up to the findings about the data."""
    return [*block_stages(state), checking_stage(list(state.settings.blocks))]


def block_stages(state: ProjectState, names: Sequence[str] = ()) -> list[Stage]:
    """Return reading and preparing of the named blocks, or of all."""
    state.require_sheet()
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
    chosen = _checked(state, analyses)
    return [*block_stages(state, _blocks_of_all(state, chosen)), *_of_analyses(state, chosen, "integrate")]


def network_stages(state: ProjectState, analyses: Sequence[str] = ()) -> list[Stage]:
    """Return the stages up to the network of the named analyses, or of all."""
    chosen = _checked(state, analyses)
    stages = _of_analyses(state, chosen, "integrate", "network")
    return [*block_stages(state, _blocks_of_all(state, chosen)), *stages]


def _blocks_of_all(state: ProjectState, analyses: Sequence[str]) -> list[str]:
    return list(dict.fromkeys(block for name in analyses for block in blocks_of(state.settings, name)))


def _of_analyses(state: ProjectState, analyses: Sequence[str], *kinds: str) -> list[Stage]:
    stages = []
    for name in analyses:
        if "integrate" in kinds:
            stages.append(integrating_stage(state, name))
        if "network" in kinds:
            stages.append(networking_stage(state, name))
        if "pathways" in kinds:
            stages.append(following_stage(state, name))
    return stages
