"""The stage behind the network: what is known about its edges, which of them to follow, and its figures."""

from __future__ import annotations

from typing import Any

import networkx as nx
import numpy as np
import pandas as pd

from workbench.figures import Drawing
from workbench.figures.edge_matrix import draw_edge_matrix
from workbench.figures.network import MOST_DRAWN, draw_network
from workbench.figures.pathways import draw_pathways
from workbench.intake.faults import counted
from workbench.network import read_graphml
from workbench.pathways import (
    Candidate,
    KnownLinks,
    SetMembers,
    edge_ends,
    known_evidence,
    match_sets,
    short_list,
)
from workbench.store import Change, check_file, read_table, table_bytes
from workbench.workflow.analysis_inputs import analysis_inputs
from workbench.workflow.analysis_stage import analysis_stage
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.drawings import write_drawings
from workbench.workflow.fingerprints import fingerprint
from workbench.workflow.followup.edge_correlations import edge_correlations
from workbench.workflow.followup.pathway_tables import (
    ALL_LAYERS,
    coherence_of,
    coherence_sentences,
    coherence_table,
    pathways_table,
    tested_sets,
)
from workbench.workflow.followup.residual_blocks import ResidualViews
from workbench.workflow.known_tables import knowledge_inputs, read_features, read_knowledge
from workbench.workflow.network.doubts import doubts_of
from workbench.workflow.network.group_correlations import group_correlations
from workbench.workflow.network.private import FILE as PRIVATE_FILE
from workbench.workflow.network.screening import is_repeated
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState

VERSION = 1
READ = ("edges.tsv", "features.tsv", "network.graphml")
CAPTIONS = "captions_pathways.tsv"
OUTPUTS = ("followup.tsv", "edge_correlations.tsv", f"figures/{CAPTIONS}")
SET_OUTPUTS = ("pathways.tsv", "coherence.tsv")
ONE_LAYER_P = "with samples permuted p ="
JOINED_P = "the layers' permutation p's joined to"
LINK_OUTPUTS = ("known_links.tsv",)


def following_stage(state: ProjectState, name: str) -> Stage:
    """Return the stage that writes the short list, the pathways and the figures of an analysis."""
    chosen = state.settings.analyses[name].pathways
    files = [*OUTPUTS, *(SET_OUTPUTS if chosen.sets else ()), *(LINK_OUTPUTS if chosen.links else ())]
    return analysis_stage(state, name, "pathways", files, _inputs, _work, "network")


def _inputs(state: ProjectState, name: str) -> dict[str, str]:
    hashes = analysis_inputs(state, name) | knowledge_inputs(state, name)
    hashes["settings of the follow-up"] = fingerprint(
        [VERSION, state.settings.analyses[name].model_dump(mode="json", exclude={"pathways"})]
    )
    for file in (*READ, PRIVATE_FILE):
        hashes[file] = state.manifest.files.get(f"results/{name}/{file}", "")
    return hashes


def _work(state: ProjectState, change: Change, reporter: Reporter, name: str) -> list[str]:
    folder = f"results/{name}"
    features = read_features(check_file(state.root, f"{folder}/features.tsv"))
    edges = read_table(check_file(state.root, f"{folder}/edges.tsv"))
    graph = read_graphml(check_file(state.root, f"{folder}/network.graphml"))
    views = ResidualViews.of_analysis(state, name)
    view = views.view
    sets, links = read_knowledge(state, name)
    drawings: list[Drawing] = [*draw_network(graph)]
    table, matrix = edge_correlations(views, features, edges)
    change.write_bytes(f"{folder}/edge_correlations.tsv", table_bytes(table))
    drawings += draw_edge_matrix(matrix)
    if sets is not None:
        members = match_sets(features, sets)
        for line in members.sentences():
            reporter.say(f"  {line}")
        drawings += _write_pathways(change, reporter, folder, views, features, edges, members)
    if links is not None:
        change.write_bytes(
            f"{folder}/known_links.tsv", table_bytes(_links_table(features, edges, links, reporter))
        )
    listed = follow_up(view, features, edges, informed=sets is not None or links is not None)
    change.write_bytes(f"{folder}/followup.tsv", table_bytes(listed))
    drawings += _draw_listed(graph, listed)
    reporter.say(f"  {followed_sentence(len(listed), len(edges))}")
    return write_drawings(change, f"{folder}/figures", tuple(drawings), CAPTIONS)


def _draw_listed(graph: nx.Graph, listed: pd.DataFrame) -> tuple[Drawing, ...]:
    """Return the picture of the short list by name, where the network is too large to be drawn so."""
    if len(graph) <= MOST_DRAWN:
        return ()
    ends = zip(
        zip(listed["source_block"], listed["source"], strict=True),
        zip(listed["target_block"], listed["target"], strict=True),
        strict=True,
    )
    return draw_network(graph.edge_subgraph(ends), name="followup", what="The short list (followup.tsv)")


def followed_sentence(listed: int, edges: int) -> str:
    """Return how many pairs are on the short list, in words."""
    if not edges:
        return "no edges, so that there is nothing to follow"
    return f"{listed} of {edges} edges on the short list (followup.tsv), best evidence first"


def _write_pathways(
    change: Change,
    reporter: Reporter,
    folder: str,
    views: ResidualViews,
    features: pd.DataFrame,
    edges: pd.DataFrame,
    members: SetMembers,
) -> tuple[Drawing, ...]:
    tested = tested_sets(views, features, members, reporter)
    table = pathways_table(tested, features, members, views.view.settings.network.fdr)
    coherence = coherence_of(views, features, edge_ends(edges, features), members, reporter)
    change.write_bytes(f"{folder}/pathways.tsv", table_bytes(table))
    change.write_bytes(f"{folder}/coherence.tsv", table_bytes(coherence_table(coherence)))
    for line in [*_pathway_sentences(table, len(tested)), *coherence_sentences(coherence)]:
        reporter.say(f"  {line}")
    return draw_pathways(table)


def _pathway_sentences(table: pd.DataFrame, tests: int) -> list[str]:
    if not tests:
        return ["no community has three features of a layer in any set: no set was tested"]
    holds = table[table["holds"]]
    told = [f"{counted(len(table), 'set')} found in communities; both p's hold for {len(holds)}"]
    for row in holds.head(5).to_dict("records"):
        permuted = JOINED_P if row["layer"] == ALL_LAYERS else ONE_LAYER_P
        told.append(
            f"community {row['community']}, {row['layer']}: {row['found']} of its {row['in_community']} features in "
            f"sets are in {row['name']} ({row['expected']:.1f} expected; q = {row['q']:.2g}, {permuted} "
            f"{row['p_permutation']:.2g})"
        )
    return told


def _links_table(
    features: pd.DataFrame, edges: pd.DataFrame, links: KnownLinks, reporter: Reporter
) -> pd.DataFrame:
    """Return known_links.tsv: every known link between measured features, and whether it is an edge."""
    known, measured = known_evidence(features, links)
    ends = {tuple(sorted(pair)): row for row, pair in enumerate(edge_ends(edges, features).tolist())}
    names, blocks = features["feature"].to_numpy(), features["block"].to_numpy()
    rows: list[dict[str, Any]] = []
    for (first, second), evidence in sorted(known.items()):
        row = ends.get((first, second))
        edge = None if row is None else edges.iloc[row]
        rows.append(
            {
                "source": names[first],
                "source_block": blocks[first],
                "target": names[second],
                "target_block": blocks[second],
                "known": evidence,
                "edge": edge is not None,
                "r": np.nan if edge is None else edge["r"],
                "q": np.nan if edge is None else edge["q"],
            }
        )
    found = sum(row["edge"] for row in rows)
    reporter.say(
        f"  {links.path}: {measured} of {len(links.evidence)} links join measured features of two layers, as "
        f"{counted(len(rows), 'pair')}; {found} of them {'is an edge' if found == 1 else 'are edges'}"
    )
    for note in links.notes:
        reporter.say(f"  {links.path}: {note}")
    columns = ["source", "source_block", "target", "target_block", "known", "edge", "r", "q"]
    return pd.DataFrame(rows, columns=columns)


def follow_up(
    view: AnalysisView, features: pd.DataFrame, edges: pd.DataFrame, *, informed: bool
) -> pd.DataFrame:
    """Return followup.tsv of an analysis."""
    fdr = view.settings.network.fdr
    ends = edge_ends(edges, features)
    needed = [name for name in ("feature", "block", "layer", "label", "cluster") if name in features]
    records = _records(features[needed])
    repeated = any(is_repeated(view.shared(pair)) for pair in view.pairs)
    level = (view.settings.level or "visits") if repeated else ""
    candidates = [
        Candidate(edge, records[source], records[target], groups, tuple(doubts_of(edge, fdr)), level)
        for edge, (source, target), groups in zip(
            _records(edges), ends.tolist(), group_correlations(view, edges), strict=True
        )
    ]
    return short_list(candidates, fdr=fdr, informed=informed)


def _records(table: pd.DataFrame) -> list[dict[str, Any]]:
    return [{str(key): value for key, value in row.items()} for row in table.to_dict("records")]
