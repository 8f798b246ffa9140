"""The two sides of a comparison: analyses with their tables, their features matched by an identifier."""

from __future__ import annotations

import json
from collections import Counter
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.pathways import identifier_columns
from workbench.store import ProjectPaths, check_file, find_project, read_table
from workbench.workflow.followup.residual_blocks import ResidualViews
from workbench.workflow.known_tables import read_features
from workbench.workflow.state import load_state

LEAST_EQUAL = 0.5
"""Share of a sample's values that must be equal in two projects for it to be one sample."""

FEWEST_EQUAL = 5

Key = tuple[str, str]
"""A feature by which two analyses are matched: layer, identifier."""


@dataclass(eq=False)
class Side:
    """One of the two analyses, with its tables and what its screen saw.

    ``rows`` maps a matched feature to its row of the features table.
    """

    name: str
    root: Path
    analysis: str
    edges: pd.DataFrame
    features: pd.DataFrame
    record: dict[str, Any]
    views: ResidualViews
    rows: dict[Key, int] = field(default_factory=dict)

    @property
    def samples(self) -> set[str]:
        """Samples that any pair of blocks was tested on."""
        return {sample for pair in self.views.view.pairs for sample in self.views.of(pair).samples}


def resolve_side(text: str, here: ProjectPaths | None) -> tuple[ProjectPaths, str]:
    """Return project and analysis that a word of the command names.

    An analysis of the project here; or a folder of a project, its analysis behind a colon where it is not ``main`` or
    the only one.
    """
    if here is not None and text in load_state(here).settings.analyses:
        return here, text
    folder, analysis = (
        (text, "") if Path(text).is_dir() else (text.rpartition(":")[0], text.rpartition(":")[2])
    )
    if not folder or not Path(folder).is_dir():
        known = (
            ", ".join(load_state(here).settings.analyses) if here is not None else "there is no project here"
        )
        raise InputError(
            f"'{text}': neither an analysis of this project ({known}) nor a folder of another one; name an analysis, "
            "a folder, or FOLDER:ANALYSIS"
        )
    paths = find_project(Path(folder))
    state = load_state(paths)
    names = list(state.settings.analyses)
    chosen = analysis or ("main" if "main" in names else names[0] if len(names) == 1 else "")
    if not chosen:
        raise InputError(
            f"{paths.root}: which analysis is meant? Write {text}:NAME with one of {', '.join(names)}"
        )
    state.require_analysis(chosen)
    return paths, chosen


def read_side(paths: ProjectPaths, analysis: str, name: str) -> Side:
    """Return an analysis with what it wrote; it must have its network."""
    state = load_state(paths)
    folder = f"results/{analysis}"
    if not (paths.root / folder / "record.json").exists():
        raise InputError(
            f"{paths.root / folder}: has no network (yet); run `workbench run {analysis} --project {paths.root}`"
        )
    return Side(
        name=name,
        root=paths.root,
        analysis=analysis,
        edges=read_table(check_file(paths.root, f"{folder}/edges.tsv")),
        features=read_features(check_file(paths.root, f"{folder}/features.tsv")),
        record=json.loads(check_file(paths.root, f"{folder}/record.json").read_text("utf-8")),
        views=ResidualViews.of_analysis(state, analysis),
    )


def common_columns(first: pd.DataFrame, second: pd.DataFrame) -> list[str]:
    """Return the columns of identifiers that both tables have."""
    return [column for column in identifier_columns(first) if column in identifier_columns(second)]


def best_column(first: pd.DataFrame, second: pd.DataFrame) -> str:
    """Return the column with most identifiers in common, the features' own names where several have as many."""

    def shared(column: str) -> int:
        held = [set(zip(table["layer"], table[column].astype(str), strict=True)) for table in (first, second)]
        return len([key for key in held[0] & held[1] if key[1]])

    columns = common_columns(first, second)
    return max(columns, key=lambda column: (shared(column), -columns.index(column)))


def keyed(side: Side, column: str, notes: list[str]) -> dict[Key, int]:
    """Return the row of each feature by layer and identifier; identifiers of several features are left out."""
    if column not in side.features:
        raise InputError(
            f"{side.name} has no column '{column}' of identifiers; it has "
            f"{', '.join(identifier_columns(side.features))}"
        )
    keys = list(zip(side.features["layer"].astype(str), side.features[column].astype(str), strict=True))
    ambiguous = {key for key, count in Counter(keys).items() if count > 1 and key[1]}
    if ambiguous:
        notes.append(
            f"{side.name}: {counted(len(ambiguous), 'identifier')} of column '{column}' left out, each for "
            f"standing for several features, {min(ambiguous)[1]!r} among them"
        )
    return {key: row for row, key in enumerate(keys) if key[1] and key not in ambiguous}


def edge_keys(side: Side) -> set[tuple[Key, Key]]:
    """Return the edges of a side between matched features, each with its keys in order."""
    own = {row: key for key, row in side.rows.items()}
    place = row_of(side.features)
    found = set()
    for ends in zip(
        zip(side.edges["source_block"], side.edges["source"], strict=True),
        zip(side.edges["target_block"], side.edges["target"], strict=True),
        strict=True,
    ):
        keys = [own.get(place[end]) for end in ends]
        if keys[0] is not None and keys[1] is not None:
            found.add((min(keys[0], keys[1]), max(keys[0], keys[1])))
    return found


def row_of(features: pd.DataFrame) -> dict[tuple[str, str], int]:
    """Return the row of each feature by block and name."""
    return {key: row for row, key in enumerate(zip(features["block"], features["feature"], strict=True))}


def tested_pairs(first: Side, second: Side) -> int:
    """Return the number of cross-layer pairs of matched features that both analyses measured."""
    layers = Counter(layer for layer, _ in first.rows.keys() & second.rows.keys())
    counts = list(layers.values())
    return (sum(counts) ** 2 - sum(count**2 for count in counts)) // 2


def dependence(first: Side, second: Side) -> str:
    """Return why the two sides' correlations are not independent, empty where they are."""
    both = sorted(first.samples & second.samples)
    if first.root != second.root:
        both = [sample for sample in both if _same_values(first, second, sample)]
    if not both:
        return ""
    shared = counted(len(both), "sample is", "samples are")
    return f"{shared} in both ({both[0]} among them), so that the two correlations are not independent"


def _same_values(first: Side, second: Side, sample: str) -> bool:
    """Return whether a sample of the same name in two projects holds the same measured values."""
    equal = compared = 0
    for name, block in first.views.view.blocks.items():
        other = second.views.view.blocks.get(name)
        if other is None or sample not in block.measured.samples or sample not in other.measured.samples:
            continue
        place = {feature: k for k, feature in enumerate(other.measured.features)}
        held = [(k, place[feature]) for k, feature in enumerate(block.measured.features) if feature in place]
        if held:
            mine, theirs = np.array(held, dtype=np.intp).T
            a = block.measured.values[block.measured.samples.index(sample), mine]
            b = other.measured.values[other.measured.samples.index(sample), theirs]
            told = np.isfinite(a) & np.isfinite(b) & (a != 0)
            equal, compared = equal + int((a[told] == b[told]).sum()), compared + int(told.sum())
    return compared >= FEWEST_EQUAL and equal >= LEAST_EQUAL * compared
