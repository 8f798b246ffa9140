"""Tables of sets and links that come later are marked on the network that stands; nothing else is made anew."""

from __future__ import annotations

from pathlib import Path

from workbench import Project
from workbench.store import read_table
from workbench.workflow.known_tables import read_features

FOLDER = "results/main"


def test_marks_are_those_of_a_network_built_anew(finished: Path, tmp_path: Path) -> None:
    """Byte for byte, with the tables and once they are taken out again; figures of pairs stay."""
    project, folder = Project.open(finished), finished / FOLDER
    before, settings = network_files(folder), (finished / "project.toml").read_text()
    first = read_table(folder / "edges.tsv").iloc[0]
    shown, *_ = project.keep_figures(project.show(str(first["source"]), str(first["target"])))
    sets, links = tmp_path / "sets.gmt", tmp_path / "links.tsv"
    sets.write_text(f"P1\tfirst\t{first['source']}\t{first['target']}\tnone\n")
    links.write_text(f"source\ttarget\tevidence\n{first['target']}\t{first['source']}\tenzyme\n")
    assert project.pathways(sets=sets, links=links).done == ["network:main", "pathways:main"]
    assert shown.exists()
    marked, edges = network_files(folder), project.result("main").edges
    assert edges.loc[0, ["known", "shared_sets"]].tolist() == ["enzyme", "first"]
    assert (edges.loc[1:, "known"] == "").all()
    (folder / "private.tsv").unlink()
    assert "network:main" in project.run().done
    assert network_files(folder) == marked
    assert not shown.exists()
    (finished / "project.toml").write_text(settings)
    assert "network:main" in project.run().done
    assert network_files(folder) == before


def test_an_edge_that_was_changed_by_hand_is_not_kept(finished: Path, tmp_path: Path) -> None:
    project, table = Project.open(finished), finished / FOLDER / "edges.tsv"
    written = table.read_text()
    table.write_text(written.replace("\twithin\t", "\tgroup\t", 1))
    sets = tmp_path / "sets.gmt"
    sets.write_text(
        "P1\tone\t" + "\t".join(read_features(finished / FOLDER / "features.tsv")["feature"][:3]) + "\n"
    )
    project.pathways(sets=sets)
    assert set(project.result("main").edges["basis"]) == {"within"}


def network_files(folder: Path) -> dict[str, bytes]:
    """Return what the network stage writes."""
    names = ("edges.tsv", "features.tsv", "network.graphml", "network.gexf", "record.json", "private.tsv")
    return {name: (folder / name).read_bytes() for name in names}
