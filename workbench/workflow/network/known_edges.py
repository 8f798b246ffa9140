"""What is known beforehand, marked on the edges, also of a network that stands already."""

from __future__ import annotations

import json
from collections.abc import Callable

import networkx as nx
import pandas as pd

from workbench.errors import InputError
from workbench.network import gexf_bytes, graphml_bytes, read_graphml
from workbench.pathways import edge_columns
from workbench.store import Change, check_file, json_bytes, read_table, table_bytes
from workbench.workflow.known_tables import read_features, read_knowledge, table_header
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage, changed_by_hand
from workbench.workflow.state import ProjectState

KNOWN = ("known", "shared_sets")
TABLES = ("sets", "known links")


def known_columns(
    state: ProjectState, reporter: Reporter, name: str, edges: pd.DataFrame, features: pd.DataFrame
) -> dict[str, pd.Series]:
    """Return the columns of what is known beforehand; none where no table is named or none of it fits."""
    sets, links = read_knowledge(state, name)
    if sets is None and links is None:
        return {}
    try:
        found = edge_columns(edges, features, sets, links)
    except InputError as error:
        reporter.say(f"  nothing known is marked on the edges: {error}")
        return {}
    return {str(column): found[column] for column in found}


def only_knowledge_changed(state: ProjectState, stage: Stage) -> bool:
    """Return whether the network of an analysis stands, and only the user's tables of sets and links are others."""
    record = state.manifest.stages.get(stage.name)
    if record is None or not set(stage.outputs) <= set(record.outputs):
        return False
    if any(not (state.root / file).exists() or changed_by_hand(state, file) for file in record.outputs):
        return False
    before, now = (
        {key: value for key, value in inputs.items() if key not in TABLES}
        for inputs in (record.inputs, stage.inputs(state))
    )
    return before == now


def mark_known(
    state: ProjectState,
    change: Change,
    reporter: Reporter,
    stage: Stage,
    order: Callable[[pd.DataFrame], pd.DataFrame],
) -> list[str]:
    """Write what is known on the edges of a network that stands; return the figures that stay with it.

    The files are those that building the network anew would give, byte for byte.
    """
    folder = f"results/{stage.subject}"
    tables = {
        file: check_file(state.root, f"{folder}/{file}")
        for file in ("edges.tsv", "features.tsv", "network.graphml", "record.json")
    }
    as_written = read_table(tables["edges.tsv"], text=table_header(tables["edges.tsv"]))
    edges = as_written.drop(columns=list(KNOWN), errors="ignore")
    features = read_features(tables["features.tsv"])
    found = known_columns(state, reporter, stage.subject, edges, features)
    graph = _marked(read_graphml(tables["network.graphml"]), edges, found)
    record = json.loads(tables["record.json"].read_text("utf-8"))
    record["parameters"] = state.settings.analyses[stage.subject].model_dump(mode="json")
    change.write_bytes(f"{folder}/edges.tsv", table_bytes(order(edges.assign(**found))))
    change.write_bytes(f"{folder}/network.graphml", graphml_bytes(graph))
    change.write_bytes(f"{folder}/network.gexf", gexf_bytes(graph))
    change.write_bytes(f"{folder}/record.json", json_bytes(record))
    what = "what is known is marked on its edges" if found else "nothing known is marked on its edges"
    reporter.say(f"  the network stands as it was; {what}")
    kept = state.manifest.stages[stage.name].outputs
    return [file for file in kept if file not in stage.outputs]


def _marked(graph: nx.Graph, edges: pd.DataFrame, found: dict[str, pd.Series]) -> nx.Graph:
    """Return the network with these texts on its edges, and no others of their kind."""
    for _, _, attributes in graph.edges(data=True):
        for column in KNOWN:
            attributes.pop(column, None)
    sources = zip(edges["source_block"], edges["source"], strict=True)
    targets = zip(edges["target_block"], edges["target"], strict=True)
    for row, pair in enumerate(zip(sources, targets, strict=True)):
        told = {column: str(texts.iloc[row]) for column, texts in found.items()}
        graph.edges[pair].update({column: text for column, text in told.items() if text})
    return graph
