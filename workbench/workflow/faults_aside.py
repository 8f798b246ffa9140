"""A project read in spite of faults in settings that the question at hand does not touch."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Literal

from workbench.errors import SettingsError
from workbench.intake import read_sample_sheet
from workbench.settings import Settings, salvaged_settings
from workbench.store import ProjectPaths, read_manifest
from workbench.workflow.state import ProjectState, load_state

Touches = Callable[[Settings, str, str], bool]
SET_ASIDE = ("analyses", "blocks", "check")
"""Tables of ``project.toml`` in which a fault may be none of a question's business."""


def state_for_block(paths: ProjectPaths, name: str) -> tuple[ProjectState, tuple[str, ...]]:
    """Return the state that a question about one block needs, and the faults of settings elsewhere."""
    return _state(paths, lambda _, table, entry: table == "blocks" and entry == name)


def state_for_analysis(paths: ProjectPaths, name: str | None) -> tuple[ProjectState, tuple[str, ...]]:
    """Return the state that a question about one analysis needs (None: the default one), and the faults elsewhere."""

    def touches(settings: Settings, table: str, entry: str) -> bool:
        chosen = settings.analyses.get(name or "main")
        if chosen is None:
            return table != "check"
        return entry == (name or "main") if table == "analyses" else _has(chosen.blocks, table, entry)

    return _state(paths, touches)


def aside_lines(faults: Sequence[str]) -> list[str]:
    """Return what was set aside, in words."""
    return [
        f"set aside, since it does not concern this (`workbench run` stops at it): {fault}"
        for fault in faults
    ]


def _has(blocks: Literal["all"] | tuple[str, ...], table: str, entry: str) -> bool:
    return table == "blocks" and (blocks == "all" or entry in blocks)


def _state(paths: ProjectPaths, touches: Touches) -> tuple[ProjectState, tuple[str, ...]]:
    """Return the state without the entries at fault; raise `SettingsError` where one of them is touched."""
    try:
        return load_state(paths), ()
    except SettingsError as error:
        settings = salvaged_settings(paths.settings)
        if settings is None or not paths.samples.exists():
            raise
        places = [_place(fault) for fault in error.faults]
        if any(table not in SET_ASIDE or touches(settings, table, entry) for table, entry in places):
            raise
        sheet = read_sample_sheet(paths.samples, id_column=settings.samples.id).frame
        return ProjectState(paths, settings, sheet, read_manifest(paths.root)), tuple(error.faults)


def _place(fault: str) -> tuple[str, str]:
    """Return the table and the entry that a fault is about.

    >>> _place("project.toml: analyses.second.network.fdr: is 2; allowed: over 0 and under 1")
    ('analyses', 'second')
    """
    table, entry, *_ = [*fault.split(": ", 2)[1].split("."), "", ""]
    return table, entry
