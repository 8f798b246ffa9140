"""The tables of what is known that an analysis names, and the table of features that they are held against."""

from __future__ import annotations

from pathlib import Path

import pandas as pd

from workbench.pathways import KnownLinks, SetTable, identifier_columns, read_links, read_sets
from workbench.store import read_table, sha256_of
from workbench.workflow.state import ProjectState


def knowledge_inputs(state: ProjectState, name: str) -> dict[str, str]:
    """Return a hash of each table of knowledge that an analysis names."""
    return {what: sha256_of(path) for what, path in _knowledge_paths(state, name).items() if path.exists()}


def read_knowledge(state: ProjectState, name: str) -> tuple[SetTable | None, KnownLinks | None]:
    """Return the sets and the known links that an analysis names; None for a table that it does not."""
    paths = _knowledge_paths(state, name)
    return (
        read_sets(paths["sets"]) if "sets" in paths else None,
        read_links(paths["known links"]) if "known links" in paths else None,
    )


def _knowledge_paths(state: ProjectState, name: str) -> dict[str, Path]:
    chosen = state.settings.analyses[name].pathways
    named = {"sets": chosen.sets, "known links": chosen.links}
    return {what: state.root / path for what, path in named.items() if path is not None}


def read_features(path: Path) -> pd.DataFrame:
    """Return features.tsv with every column of identifiers as text, whatever it looks like."""
    identifiers = identifier_columns(pd.DataFrame(columns=table_header(path)))
    table: pd.DataFrame = read_table(path, text=[*identifiers, "cluster"])
    return table


def table_header(path: Path) -> list[str]:
    """Return the names of a stored table's columns."""
    with path.open(encoding="utf-8") as file:
        return file.readline().rstrip("\n").split("\t")
