"""Real data that nobody here made: 198 patients with node-negative breast cancer.

The tables ship in the package scikit-survival (`sksurv.datasets.load_breast_cancer`): 76 transcript probes on a log
scale and four clinical readings, from Desmedt et al. 2007 (Clin Cancer Res 13:3207; GEO series GSE7390).  That
oestrogen-receptor status shows in expression more than age or size do is a fact of the trade (common practice; for
example Perou et al. 2000, Nature 406:747).
"""

import igraph
import networkx as nx
import pandas as pd
import pytest
from sksurv.datasets import load_breast_cancer

from workbench import Project

CLINICAL = ["age", "er", "grade", "size"]


@pytest.fixture(scope="module")
def project(tmp_path_factory):
    folder = tmp_path_factory.mktemp("breast")
    table, _ = load_breast_cancer()
    table.index = pd.Index([f"P{number:03d}" for number in range(1, len(table) + 1)], name="patient")
    pd.DataFrame(index=table.index).to_csv(folder / "patients.tsv", sep="\t")
    table.drop(columns=CLINICAL).T.rename_axis("probe").to_csv(folder / "expression.tsv", sep="\t")
    table[CLINICAL].iloc[::-1].to_csv(folder / "clinical.csv")
    project = Project.create(folder / "study", title="Node-negative breast cancer")
    project.add_samples(folder / "patients.tsv")
    project.add_block("expression", folder / "expression.tsv", layer="transcripts", values="log")
    project.add_block("readings", folder / "clinical.csv", layer="clinical", values="mixed")
    project.run("main")
    return project


def test_receptor_status_is_what_the_network_is_about(project):
    edges = project.result("main").edges
    per_reading = edges["target"].value_counts()
    receptor = per_reading[[name for name in per_reading.index if name.startswith("er")]].sum()
    assert len(edges) > 20
    assert receptor > per_reading.get("age", 0)
    assert receptor > per_reading.get("size", 0)
    assert edges.iloc[0]["target"].startswith("er")


def test_the_first_canonical_pair_is_real_out_of_sample(project):
    first = project.result("main").components.iloc[0]
    assert first["p"] <= 0.002
    assert first["correlation"] > first["correlation_cv"] > 0.5


def test_receptor_status_leads_the_first_canonical_pair(project):
    features = project.result("main").features
    readings = features[features["block"] == "readings"].set_index("feature")
    assert readings["pair1_own"].abs().idxmax().startswith("er")


def test_networkx_and_igraph_read_the_same_network(project):
    path = project.paths.analysis("main") / "network.graphml"
    first, second = nx.read_graphml(path), igraph.Graph.Read_GraphML(str(path))
    assert second.vcount() == first.number_of_nodes() > 20
    assert second.ecount() == first.number_of_edges() == len(project.result("main").edges)
    for vertex in second.vs:
        found = first.nodes[vertex["id"]]
        assert (found["label"], found["block"], found["degree"]) == (
            vertex["label"],
            vertex["block"],
            vertex["degree"],
        )
    weights = {frozenset((a, b)): (data["r"], data["n"]) for a, b, data in first.edges(data=True)}
    names = second.vs["id"]
    for edge in second.es:
        assert weights[frozenset((names[edge.source], names[edge.target]))] == (edge["r"], edge["n"])
