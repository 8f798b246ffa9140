"""Taking a block out of the project, with all results that rest on it."""

from __future__ import annotations

from collections.abc import Iterable
from contextlib import suppress
from pathlib import Path

from workbench.errors import InputError
from workbench.settings import check_name, cross_check, parse_settings, read_settings_text, remove_block_text
from workbench.store import Change, ProjectPaths, project_lock
from workbench.workflow.entry.looking import BETWEEN
from workbench.workflow.state import ProjectState, load_state

OF_A_BLOCK = ("read", "prepare", "look")
OF_ALL_BLOCKS = ("check:data", f"look:{BETWEEN}")


def remove_block(paths: ProjectPaths, name: str) -> tuple[str, ...]:
    """Take a block, its settings and every result that rests on it out; its source stays.

    Returns
    -------
    tuple of str
        The folders of results that were taken away, relative to the project.
    """
    check_name(name, "block")
    with project_lock(paths.root, f"remove-block {name}"):
        state = load_state(paths, replaced=name)
        state.require_block(name)
        text = remove_block_text(read_settings_text(paths.settings), name)
        _require_whole(state, text, name)
        stages = resting_on(state, name)
        outputs = sorted({output for stage in stages for output in state.manifest.stages[stage].outputs})
        gone = [output for output in outputs if (paths.root / output).exists()]
        with Change(paths.root) as change:
            change.write_text("project.toml", text)
            for relative in gone:
                change.remove(relative)
            for stage in stages:
                change.forget_stage(stage)
            change.commit({"command": "remove-block", "block": name, "removed": gone})
    folders = dict.fromkeys(Path(file).parent for file in gone)
    _remove_empty(paths.root, folders)
    return tuple(_topmost(folder.as_posix() for folder in folders if folder.parts[0] == "results"))


def resting_on(state: ProjectState, block: str) -> list[str]:
    """Return the recorded stages whose answer rests on a block: its own, those of all blocks, and its analyses'."""
    analyses = {name for name in state.settings.analyses if block in state.settings.blocks_of(name)}
    found = []
    for stage in state.manifest.stages:
        kind, _, subject = stage.partition(":")
        own = kind in OF_A_BLOCK and subject == block
        if own or stage in OF_ALL_BLOCKS or (kind not in OF_A_BLOCK and subject in analyses):
            found.append(stage)
    return found


def _topmost(folders: Iterable[str]) -> list[str]:
    """Return the folders without those that lie below another of them."""
    kept: list[str] = []
    for folder in sorted(folders):
        if not any(folder.startswith(f"{other}/") for other in kept):
            kept.append(folder)
    return kept


def _remove_empty(root: Path, folders: dict[Path, None]) -> None:
    """Remove folders of results that hold nothing any more; what a person laid there keeps its folder."""
    for folder in sorted(folders, key=lambda one: len(one.parts), reverse=True):
        for place in (folder, *folder.parents):
            if len(place.parts) > 1:
                with suppress(OSError):
                    (root / place).rmdir()


def _require_whole(state: ProjectState, text: str, name: str) -> None:
    """Refuse to take a block out when the settings that are left would not hold, before anything is written."""
    left = parse_settings(text, state.paths.settings)
    faults = [] if state.sheet is None else cross_check(left, state.sheet, state.root)
    if faults:
        raise InputError(
            f"{state.paths.settings}: block '{name}' cannot be taken out as the settings stand; change them "
            "first, nothing was changed:\n  " + "\n  ".join(faults)
        )
