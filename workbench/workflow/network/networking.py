"""The fourth stage: tested pairs become edges, the edges a network, and both leave as open files."""

from __future__ import annotations

import numpy as np
import pandas as pd

from workbench import __version__
from workbench.network import (
    build_network,
    gexf_bytes,
    graphml_bytes,
    rated_network,
    with_communities,
    with_degrees,
)
from workbench.store import Change, json_bytes, table_bytes
from workbench.workflow.analysis_inputs import analysis_inputs
from workbench.workflow.analysis_stage import analysis_stage
from workbench.workflow.analysis_view import AnalysisView, view_analysis
from workbench.workflow.choices import choices_of
from workbench.workflow.drawings import write_drawings
from workbench.workflow.fingerprints import fingerprint
from workbench.workflow.known_tables import knowledge_inputs
from workbench.workflow.network.differences import group_contrasts
from workbench.workflow.network.edges import edges_table, group_pairs_table
from workbench.workflow.network.feature_table import (
    canonical_correlations,
    features_table,
    implied_correlations,
)
from workbench.workflow.network.known_edges import known_columns, mark_known, only_knowledge_changed
from workbench.workflow.network.private import FILE as PRIVATE_FILE
from workbench.workflow.network.private import draw_removed, heavy_tailed, private_table, write_scores
from workbench.workflow.network.record import analysis_record, fragile_sentence, screen_sentences
from workbench.workflow.network.screening import screen_analysis
from workbench.workflow.network.showing import SHOWN
from workbench.workflow.network.steadiness import edge_stability, half_edges, stability_lines
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import Stage
from workbench.workflow.state import ProjectState

VERSION = 2
EDGE_COLUMNS = (
    *(
        "source",
        "source_block",
        "target",
        "target_block",
        "n",
        "changes",
        "subjects",
        "r",
        "r_low",
        "r_high",
        "p",
        "q",
        "q_block",
    ),
    *("r_total", "q_total", "r_within", "q_within", "basis", "support", "model_r", "component", "stability"),
    *("r_spearman", "r_without_one", "r_observed", "imputed_share", "community"),
    *("known", "shared_sets"),
)
FEATURE_COLUMNS = ("feature", "block", "layer", "label", "degree", "community", "cluster")
FILES = (
    "edges.tsv",
    "group_pairs.tsv",
    "features.tsv",
    "network.graphml",
    "network.gexf",
    "record.json",
    "private.tsv",
    "differential.tsv",
    PRIVATE_FILE,
)


def networking_stage(state: ProjectState, name: str) -> Stage:
    """Return the stage that writes the tables of edges and features, the GraphML and the record."""
    return analysis_stage(state, name, "network", FILES, _inputs, _work, "integrate")


def _inputs(state: ProjectState, name: str) -> dict[str, str]:
    hashes = analysis_inputs(state, name)
    hashes["settings of the network"] = fingerprint(
        [VERSION, state.settings.analyses[name].network.model_dump(mode="json")]
    )
    hashes["choices with a reason"] = fingerprint(list(choices_of(state.settings)))
    hashes |= knowledge_inputs(state, name)
    hashes["canonical pairs"] = state.manifest.files.get(f"results/{name}/model.h5", "")
    return hashes


def _work(state: ProjectState, change: Change, reporter: Reporter, name: str) -> list[str]:
    stage = networking_stage(state, name)
    if only_knowledge_changed(state, stage):
        return mark_known(state, change, reporter, stage, edges_in_order)
    view = view_analysis(state, name)
    screens = screen_analysis(view, reporter)
    edges, features = edges_table(view, screens), features_table(view)
    steady = edge_stability(view, screens, reporter)
    edges["stability"] = np.nan if steady is None else steady.share
    canonical = canonical_correlations(state, name)
    edges[["model_r", "component"]] = implied_correlations(edges, canonical)
    places = pd.MultiIndex.from_frame(features[["block", "feature"]])
    features[list(canonical.columns)] = canonical.reindex(places).to_numpy()
    edges = edges.assign(**known_columns(state, reporter, name, edges, features))
    graph = build_network(edges, features, attributes=graph_attributes(view), seed=view.settings.seed)
    halves = [half_edges(view, found) for found in steady.found] if steady is not None else None
    resamples = view.settings.network.stability
    graph = rated_network(graph, resamples=resamples, seed=view.settings.seed, halves=halves)
    edges = edges_in_order(with_communities(edges, graph))
    features = in_order(with_degrees(features, graph), FEATURE_COLUMNS)
    pairs = group_pairs_table(view, screens)
    contrasts = group_contrasts(view, screens, reporter)
    folder = f"results/{name}"
    tables = {"edges": edges, "group_pairs": pairs, "features": features, "differential": contrasts.table}
    for file, table in tables.items():
        change.write_bytes(f"{folder}/{file}.tsv", table_bytes(table))
    _clear_shown(state, change, name)
    change.write_bytes(f"{folder}/network.graphml", graphml_bytes(graph))
    change.write_bytes(f"{folder}/network.gexf", gexf_bytes(graph))
    heavy = heavy_tailed(screens.chosen)
    record = analysis_record(state, view, screens, len(pairs), heavy)
    change.write_bytes(f"{folder}/record.json", json_bytes(record))
    change.write_bytes(f"{folder}/private.tsv", table_bytes(private_table(state, view, screens.chosen)))
    write_scores(change.new_file(f"{folder}/{PRIVATE_FILE}"), view, screens.chosen)
    drawings = draw_removed(screens.chosen)
    written = (
        write_drawings(change, f"{folder}/figures", drawings, "captions_network.tsv") if drawings else []
    )
    for line in filter(
        None,
        [
            *screen_sentences(view, screens, len(pairs), heavy),
            fragile_sentence(edges, view.settings.network.correlation),
            *stability_lines(steady),
            *contrasts.lines,
        ],
    ):
        reporter.say(f"  {line}")
    return written


def _clear_shown(state: ProjectState, change: Change, name: str) -> None:
    """Take away the figures of single pairs: they show what an earlier network rested on."""
    folder = state.paths.analysis(name) / SHOWN
    for path in sorted(folder.glob("*")) if folder.is_dir() else ():
        change.remove(path.relative_to(state.root).as_posix())


def graph_attributes(view: AnalysisView) -> dict[str, object]:
    """Return what the network says of itself."""
    network = view.settings.network
    return {
        "title": view.study.study.title,
        "analysis": view.name,
        "fdr": network.fdr,
        "select": network.select if view.factors else "no group",
        "correlation": network.correlation,
        "version": __version__,
    }


def edges_in_order(table: pd.DataFrame) -> pd.DataFrame:
    """Return the edges with the documented columns first."""
    return in_order(table, EDGE_COLUMNS)


def in_order(table: pd.DataFrame, first: tuple[str, ...]) -> pd.DataFrame:
    """Return a table with the documented columns first, as far as it has them, and the others behind."""
    leading = [column for column in first if column in table]
    return table[[*leading, *(column for column in table.columns if column not in leading)]]
