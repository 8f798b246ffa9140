"""Real data that nobody here made: 198 patients with node-negative breast cancer.

The tables ship in the package scikit-survival (`sksurv.datasets.load_breast_cancer`): 76 transcript probes on a log
scale and four clinical readings, from Desmedt et al. 2007 (Clin Cancer Res 13:3207; GEO series GSE7390).  That
oestrogen-receptor status and histological grade show in expression far more than age or size do is a fact of the
trade (common practice; for example Perou et al. 2000, Nature 406:747, and Sotiriou et al. 2006, J Natl Cancer Inst
98:262).
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


def strongest(edges, reading):
    return edges.loc[edges["target"].str.startswith(reading), "r"].abs().max()


def test_receptor_status_and_grade_are_what_the_network_is_about(project):
    edges = project.result("main").edges
    count = edges["target"].str.partition("=")[0].value_counts()
    assert count["er"] > 76 / 4
    assert count["er"] > count.get("age", 0) + count.get("size", 0)
    assert strongest(edges, "er") > 0.4
    assert strongest(edges, "grade=") > 0.4


def test_the_first_canonical_pair_is_real_out_of_sample(project):
    first = project.result("main").components.iloc[0]
    assert first["p"] <= 0.002
    assert first["correlation"] > first["correlation_cv"] > 0.5


def test_receptor_status_and_grade_lead_the_first_canonical_pair(project):
    features = project.result("main").features
    own = features[features["block"] == "readings"].set_index("feature")["pair1_own"].abs()
    assert own["er=positive"] > 0.6
    assert own["grade=poorly differentiated"] > 0.6
    assert own["age"] < 0.5


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
