"""An analysis on another project's samples: frozen preparation and model, and which of its edges show there too."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

import h5py
import pandas as pd

from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.store import (
    Change,
    ProjectPaths,
    check_file,
    find_project,
    project_lock,
    read_table,
    table_bytes,
)
from workbench.workflow.analysis_view import AnalysisView, blocks_of, view_analysis
from workbench.workflow.loaded_block import load_block
from workbench.workflow.state import ProjectState, load_state
from workbench.workflow.supervised.applied_edges import replicated_edges
from workbench.workflow.supervised.applied_model import apply_model


@dataclass(frozen=True, eq=False)
class Applied:
    """What an analysis says on another project's samples.

    Attributes
    ----------
    other : str
        Name of the other project's folder, behind that of the folder above it where both projects' are called alike.
    predictions, performance, missing, shifted, edges : DataFrame or None
        ``predictions`` and ``performance`` of multi-block PLS (``performance`` where the outcome is known there);
        ``missing`` the features of the model that are not there, ``shifted`` those at other levels; ``edges`` where
        the analysis has a network.
    lines : tuple of str
        The same in sentences.
    """

    other: str
    predictions: pd.DataFrame | None
    performance: pd.DataFrame | None
    missing: pd.DataFrame | None
    shifted: pd.DataFrame | None
    edges: pd.DataFrame | None
    lines: tuple[str, ...]


def apply_analysis(paths: ProjectPaths, analysis: str, folder: Path, *, write: bool = True) -> Applied:
    """Apply an analysis to another project's samples.

    Nothing of the other project is changed, and nothing is learnt from it: it must have its blocks prepared. Tables
    go to ``results/ANALYSIS/applied/NAME`` of this project.

    Parameters
    ----------
    paths : ProjectPaths
        The project whose analysis it is.
    analysis : str
    folder : Path
        The other project.
    write : bool
        Whether to write the tables.

    Raises
    ------
    InputError
        When the analysis has not run, the two projects share no block, or the other's blocks are not prepared.
    """
    state, other = load_state(paths), load_state(_other_paths(paths, folder))
    state.require_analysis(analysis)
    if (
        not (paths.analysis(analysis) / "record.json").exists()
        and not (paths.analysis(analysis) / "model.h5").exists()
    ):
        raise InputError(f"analysis '{analysis}' has no results yet; run `workbench run {analysis}` first")
    view = view_analysis(state, analysis)
    there = _view_there(other, view)
    model = None
    if view.settings.method == "multiblock_pls":
        model = apply_model(state, view, there, *_stored(state, analysis))
    edges, lines = _edges(state, view, there)
    lines = [*_pairing_lines(view, there), *(model.lines if model is not None else ()), *lines]
    applied = Applied(
        _name_there(state.root, other.root),
        None if model is None else model.predictions,
        None if model is None else model.performance,
        None if model is None else model.missing,
        None if model is None else model.shifted,
        edges,
        tuple(lines),
    )
    if write:
        _write(paths, analysis, applied)
    return applied


def applied_folder(analysis: str, other: str) -> str:
    """Return where the tables go, relative to the project.

    >>> applied_folder("main", "second cohort")
    'results/main/applied/second_cohort'
    """
    return f"results/{analysis}/applied/{re.sub(r'[^A-Za-z0-9_.-]+', '_', other).strip('.') or 'other'}"


def _name_there(here: Path, there: Path) -> str:
    return there.name if there.name != here.name else f"{there.resolve().parent.name}_{there.name}"


def _other_paths(paths: ProjectPaths, folder: Path) -> ProjectPaths:
    if not folder.is_dir():
        raise InputError(f"{folder}: no such folder; --to takes the folder of another project")
    other = find_project(folder)
    if other.root.resolve() == paths.root.resolve():
        raise InputError(
            f"{folder}: the same project; --to takes another one, whose samples the model has not seen"
        )
    return other


def _view_there(other: ProjectState, view: AnalysisView) -> AnalysisView:
    """Return the other project's blocks under the names that they have here; those that it lacks are not there."""
    blocks = {}
    for name, block in view.blocks.items():
        same = [
            b
            for b, one in other.settings.blocks.items()
            if (one.layer, one.values) == (block.layer, block.settings.values)
        ]
        own = [
            b
            for b, one in view.blocks.items()
            if (one.layer, one.settings.values) == (block.layer, block.settings.values)
        ]
        theirs = name if name in same else same[0] if len(same) == 1 == len(own) else None
        if theirs is None:
            continue
        if not other.paths.prepared_block(theirs).exists():
            raise InputError(
                f"{other.root}: block '{theirs}' is not prepared there; run "
                f"`workbench prepare --project {other.root}` first"
            )
        blocks[name] = load_block(other, theirs)
    if not blocks:
        raise InputError(
            f"{other.root}: none of the blocks {', '.join(view.blocks)} is there; a block is found by its name, layer "
            "and values, or by layer and values where there is one"
        )
    return AnalysisView(view.name, view.settings, other.settings, other.require_sheet(), blocks)


def _stored(state: ProjectState, analysis: str) -> tuple[tuple[str, ...], int, str]:
    """Return the blocks of the stored model, its number of components, and what counts alike in it."""
    with h5py.File(check_file(state.root, f"results/{analysis}/model.h5"), "r") as file:
        held = set(file["blocks"])
        blocks = tuple(name for name in blocks_of(state.settings, analysis) if name in held)
        return blocks, int(file["scores"].shape[1]), str(file.attrs.get("alike", "blocks"))


def _pairing_lines(view: AnalysisView, there: AnalysisView) -> list[str]:
    lines = [
        f"block {name} there: {there.blocks[name].name}, {counted(len(there.blocks[name].samples), 'sample')}"
        for name in there.blocks
    ]
    lacking = [name for name in view.blocks if name not in there.blocks]
    return lines + ([f"not there: block {', '.join(lacking)}"] if lacking else [])


def _edges(
    state: ProjectState, view: AnalysisView, there: AnalysisView
) -> tuple[pd.DataFrame | None, list[str]]:
    relative = f"results/{view.name}/edges.tsv"
    if not (state.root / relative).exists():
        return None, [
            f"no network yet: `workbench network {view.name}` gives edges that could be looked for there"
        ]
    edges = read_table(check_file(state.root, relative))
    return replicated_edges(edges, view, there)


def _write(paths: ProjectPaths, analysis: str, applied: Applied) -> None:
    folder = applied_folder(analysis, applied.other)
    with project_lock(paths.root, f"apply {analysis}"), Change(paths.root) as change:
        for name in ("predictions", "performance", "missing", "shifted", "edges"):
            table = getattr(applied, name)
            if table is not None:
                change.write_bytes(f"{folder}/{name}.tsv", table_bytes(table))
        change.write_text(f"{folder}/applied.txt", "\n".join(applied.lines) + "\n")
        change.commit({"command": "apply", "analysis": analysis, "to": applied.other})
