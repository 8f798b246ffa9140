"""Tables of what is known beforehand, brought into a project: sets of features, known links."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import tomlkit

from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.pathways import read_links, read_sets
from workbench.settings import parse_settings, read_settings_text
from workbench.store import Change, ProjectPaths, project_lock
from workbench.workflow.entry.sources import delivered_file, keep_source
from workbench.workflow.followup.following import following_stage
from workbench.workflow.plan import network_stages
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState, load_state

SUFFIXES = (".tsv", ".txt", ".gmt")


def pathways_stages(state: ProjectState, analyses: Sequence[str] = ()) -> list[Stage]:
    """Return the stages up to the short list of the named analyses, or of all."""
    stages = [stage for stage in network_stages(state, analyses) if stage.kind != "pathways"]
    chosen = [stage.subject for stage in stages if stage.kind == "network"]
    return [*stages, *(following_stage(state, name) for name in chosen)]


def add_knowledge(
    paths: ProjectPaths, analyses: Sequence[str], sets: Path | None, links: Path | None
) -> tuple[str, ...]:
    """Keep the tables under ``source/`` and write them into the settings of the analyses; return what they hold.

    Raises
    ------
    InputError
        When a table cannot be read, or the project has no such analysis.
    """
    given = {key: path for key, path in (("sets", sets), ("links", links)) if path is not None}
    told = _looked_through(given)
    with project_lock(paths.root, "pathways"):
        state = load_state(paths)
        for name in analyses:
            state.require_analysis(name)
        with Change(paths.root) as change:
            kept = {key: keep_source(change, paths, path) for key, path in given.items()}
            text = read_settings_text(paths.settings)
            entries = {key: file for key, (file, _) in kept.items()}
            changed = with_knowledge(text, list(analyses) or list(state.settings.analyses), entries)
            parse_settings(changed, paths.settings)
            if changed != text:
                change.write_text("project.toml", changed)
            sources = [
                {"file": file, "sha256": digest, "delivered_as": given[key].name}
                for key, (file, digest) in kept.items()
            ]
            change.commit({"command": "pathways", "sources": sources})
    return told


def _looked_through(given: dict[str, Path]) -> tuple[str, ...]:
    """Return what the tables hold; a table that cannot be used is refused before anything is written."""
    told = []
    for key, path in given.items():
        delivered_file(path)
        if path.suffix.lower() not in SUFFIXES:
            raise InputError(
                f"{path}: a table of {key} is a tab-separated text ({', '.join(SUFFIXES)}); save it as one"
            )
        if key == "sets":
            table = read_sets(path)
            told.append(
                f"{path.name}: {counted(len(table.sets), 'set')} of {counted(len(table.members), 'identifier')}"
            )
            told += [f"{path.name}: {note}" for note in table.notes]
        else:
            links = read_links(path)
            told.append(f"{path.name}: {counted(len(links.evidence), 'known link')}")
    return tuple(told)


def with_knowledge(text: str, analyses: Sequence[str], entries: dict[str, str]) -> str:
    r"""Return the settings in which the analyses name these tables; comments and order stay.

    Examples
    --------
    >>> print(with_knowledge('[analyses.main]\nblocks = "all"\n', ["main"], {"sets": "source/a.gmt"}), end="")
    [analyses.main]
    blocks = "all"
    <BLANKLINE>
    [analyses.main.pathways]
    sets = "source/a.gmt"
    """
    document = tomlkit.parse(text)
    for name in analyses:
        analysis: Any = document["analyses"][name]
        if "pathways" not in analysis:
            if len(analysis):
                analysis.add(tomlkit.nl())
            analysis["pathways"] = tomlkit.table()
        for key, file in entries.items():
            analysis["pathways"][key] = file
    return tomlkit.dumps(document)
