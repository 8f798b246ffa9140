"""The stage behind the network on disk: short list, pathways, known links, figures; offline, repeatable, whole."""

from __future__ import annotations

import shutil
import socket
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from simulated import simulate
from table_projects import project_of

from workbench import Project
from workbench.errors import InputError
from workbench.store import read_table
from workbench.workflow.followup.knowledge import add_knowledge, pathways_stages, with_knowledge
from workbench.workflow.reporting import SILENT, Reporter
from workbench.workflow.stages import run_stages

SEED = 11


def follow(project: Project, reporter: Reporter = SILENT) -> Path:
    """Run the stage and return the folder of its files."""
    run_stages(project.paths, "pathways", pathways_stages, reporter)
    return project.paths.analysis("main")


class Heard(Reporter):
    """Keeps what is said."""

    def __init__(self) -> None:
        self.lines: list[str] = []

    def say(self, text: str) -> None:
        self.lines.append(text)


@pytest.fixture(scope="session")
def knowledge(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    """Return tables of sets and links: each planted module is a set, others hold features at random."""
    from conftest import SMALL

    study, folder = simulate(SMALL, seed=SEED), tmp_path_factory.mktemp("knowledge")
    rows, links = [], []
    for block, table in study.blocks.items():
        modules = study.truth.modules[block]
        for number, feature in enumerate(table.columns):
            name = f"planted {modules[number]}" if modules[number] >= 0 else f"other {number % 4}"
            rows.append((name.replace(" ", "_"), name, feature))
    blocks = list(study.blocks)
    inside = [study.blocks[b].columns[study.truth.modules[b] == 0] for b in blocks]
    links = [(inside[0][0], inside[1][0], "enzyme"), ("unknown", inside[1][0], "x")]
    sets_file, links_file = folder / "pathways.tsv", folder / "links.tsv"
    pd.DataFrame(rows, columns=["set", "name", "feature"]).to_csv(sets_file, sep="\t", index=False)
    pd.DataFrame(links, columns=["source", "target", "evidence"]).to_csv(links_file, sep="\t", index=False)
    return sets_file, links_file


@pytest.fixture(scope="session")
def followed(tmp_path_factory: pytest.TempPathFactory, run_once: Path, knowledge: tuple[Path, Path]) -> Path:
    """Return a project that was followed up to its pathways; never change it."""
    folder = tmp_path_factory.mktemp("followed") / "study"
    shutil.copytree(run_once, folder)
    project = Project.open(folder)
    add_knowledge(project.paths, (), *knowledge)
    follow(project)
    return folder


def test_planted_modules_come_first_and_hold_by_both_p(followed: Path) -> None:
    table = read_table(followed / "results" / "main" / "pathways.tsv")
    assert set(table["name"].head(2)) == {"planted 0", "planted 1"}
    assert table["holds"].head(2).all()
    assert not table.loc[table["name"].str.startswith("other"), "holds"].any()
    assert (table["p_permutation"].dropna() >= 1e-6).all()


def test_edges_share_sets_more_than_by_either_chance(followed: Path) -> None:
    (row,) = read_table(followed / "results" / "main" / "coherence.tsv").to_dict("records")
    assert row["sharing"] > row["expected_rewired"]
    assert row["p_rewired"] <= 0.05
    assert row["p_permuted"] <= 0.05


def test_the_short_list_can_be_checked_in_edges_tsv(followed: Path) -> None:
    folder = followed / "results" / "main"
    listed, edges = read_table(folder / "followup.tsv"), read_table(folder / "edges.tsv")
    keys = ["source", "source_block", "target", "target_block"]
    found = listed.merge(edges, on=keys, suffixes=("", "_edge"))
    assert len(found) == len(listed) > 0
    assert (found["r"] == found["r_edge"]).all()
    for row in found.itertuples():
        assert row.source in row.sentence
        assert f"r = {row.r:.2f}" in row.sentence
        assert f"over {row.n} samples" in row.sentence


def test_known_links_are_told_with_their_standing(followed: Path) -> None:
    table = read_table(followed / "results" / "main" / "known_links.tsv")
    assert len(table) == 1
    assert table["known"].tolist() == ["enzyme"]


def test_figures_come_with_captions_and_the_matrix_with_its_table(followed: Path) -> None:
    folder = followed / "results" / "main"
    captions = read_table(folder / "figures" / "captions_pathways.tsv")
    assert captions["figure"].tolist() == ["network", "edge_correlations", "pathways"]
    for name in captions["figure"]:
        for ending in ("svg", "png"):
            assert (folder / "figures" / f"{name}.{ending}").stat().st_size > 1000
    matrix = read_table(folder / "edge_correlations.tsv")
    names = [f"{block}:{feature}" for block, feature in zip(matrix["block"], matrix["feature"], strict=True)]
    assert list(matrix.columns[4:]) == names
    assert (abs(matrix[names].to_numpy().diagonal() - 1.0) < 1e-6).all()
    assert matrix["community"].is_monotonic_increasing


def test_correlations_of_the_matrix_are_those_of_the_edges(followed: Path) -> None:
    """To 0.02: far values are pulled in before the design is taken out here, and after it in the screen."""
    folder = followed / "results" / "main"
    matrix = read_table(folder / "edge_correlations.tsv").set_index("feature")
    for edge in read_table(folder / "edges.tsv").itertuples():
        if edge.source in matrix.index and edge.target in matrix.index:
            assert abs(matrix.loc[edge.source, f"{edge.target_block}:{edge.target}"] - edge.r) < 0.02


def test_nothing_leaves_by_the_network(
    followed: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The stage runs with sockets closed, and gives the same bytes again."""

    def refused(*_: object) -> None:
        raise AssertionError("a socket was opened")

    again = shutil.copytree(followed, tmp_path / "again")
    folder = again / "results" / "main"
    before = {path.name: path.read_bytes() for path in folder.rglob("*") if path.is_file()}
    (folder / "followup.tsv").unlink()
    monkeypatch.setattr(socket, "socket", refused)
    follow(Project.open(again))
    assert {path.name: path.read_bytes() for path in folder.rglob("*") if path.is_file()} == before


def test_a_second_run_does_nothing_and_a_changed_table_runs_again(followed: Path, tmp_path: Path) -> None:
    again = Project.open(shutil.copytree(followed, tmp_path / "again"))
    assert run_stages(again.paths, "pathways", pathways_stages, SILENT).done == []
    sets = again.paths.source / "pathways.tsv"
    sets.write_text(sets.read_text() + "new\tnew\tnothing\n")
    done = run_stages(again.paths, "pathways", pathways_stages, SILENT).done
    assert done in (["pathways:main"], ["network:main", "pathways:main"])


def test_without_tables_the_list_and_the_figures_are_there(finished: Path) -> None:
    heard = Heard()
    (finished / "results" / "main" / "followup.tsv").unlink(missing_ok=True)
    folder = follow(Project.open(finished), heard)
    assert len(read_table(folder / "followup.tsv")) > 0
    assert not (folder / "pathways.tsv").exists()
    assert any("on the short list (followup.tsv)" in line for line in heard.lines)
    assert (folder / "figures" / "network.svg").exists()


def test_sets_of_other_identifiers_stop_the_stage_with_the_way_out(finished: Path, tmp_path: Path) -> None:
    sets = tmp_path / "foreign.gmt"
    sets.write_text("P1\tone\tENSG01\tENSG02\n")
    project = Project.open(finished)
    told = add_knowledge(project.paths, ("main",), sets, None)
    assert told == ("foreign.gmt: 1 set of 2 identifiers",)
    with pytest.raises(
        InputError, match=r"none of its 2 identifiers \('ENSG01', 'ENSG02'\) is in any column"
    ):
        follow(project)
    assert not (project.paths.analysis("main") / "pathways.tsv").exists()


@pytest.mark.parametrize(
    ("lines", "reason"),
    [
        ("P1\tone\tg0\tg1\tg2\n", "the sets hold no feature of lcms"),
        ("P1\tone\tg0\tg1\tg2\nP2\ttwo\tm0\tm1\tm2\n", "no set holds features of both"),
    ],
)
def test_sets_of_one_layer_cannot_be_asked_about_coherence(
    finished: Path, tmp_path: Path, lines: str, reason: str
) -> None:
    table = read_table(finished / "results" / "main" / "features.tsv")
    for short, block in (("g", "rna"), ("m", "lcms")):
        for place, feature in enumerate(table.loc[table["block"] == block, "feature"].head(3)):
            lines = lines.replace(f"\t{short}{place}", f"\t{feature}")
    sets = tmp_path / "sets.gmt"
    sets.write_text(lines)
    project, heard = Project.open(finished), Heard()
    project.pathways(sets=sets, reporter=heard)
    (row,) = read_table(project.paths.analysis("main") / "coherence.tsv").to_dict("records")
    assert row["reason"].startswith(reason)
    assert np.isnan(row["p_rewired"])
    assert any(f"rna x lcms: {reason}" in line for line in heard.lines)


def test_the_p_of_joined_layers_is_told_as_joined(followed: Path, tmp_path: Path) -> None:
    again = Project.open(shutil.copytree(followed, tmp_path / "again"))
    (again.paths.analysis("main") / "pathways.tsv").unlink()
    heard = Heard()
    follow(again, heard)
    told = [line for line in heard.lines if "expected; q" in line]
    joined = [line for line in told if ", all layers: " in line]
    assert joined
    assert all("the layers' permutation p's joined to" in line for line in joined)
    assert all("with samples permuted p" in line for line in told if line not in joined)


def test_tables_are_refused_before_anything_is_written(finished: Path, tmp_path: Path) -> None:
    project, settings = Project.open(finished), (finished / "project.toml").read_text()
    table = tmp_path / "sets.xlsx"
    table.write_text("no table")
    with pytest.raises(InputError, match=r"a table of sets is a tab-separated text \(\.tsv, \.txt, \.gmt\)"):
        add_knowledge(project.paths, (), table, None)
    with pytest.raises(InputError, match="no such file"):
        add_knowledge(project.paths, (), tmp_path / "none.tsv", None)
    bad = tmp_path / "links.tsv"
    bad.write_text("source\tname\n")
    with pytest.raises(InputError, match="line 1 has no column 'target'"):
        add_knowledge(project.paths, (), None, bad)
    assert (finished / "project.toml").read_text() == settings
    assert not (finished / "source" / "links.tsv").exists()


def test_settings_keep_their_comments() -> None:
    text = (
        '# mine\n[analyses.main]\nblocks = "all"  # both\n\n[analyses.main.network]\nfdr = 0.1\n\n[check]\n'
    )
    changed = with_knowledge(text, ["main"], {"sets": "source/a.tsv"})
    assert "# mine" in changed
    assert "# both" in changed
    assert 'sets = "source/a.tsv"' in changed
    again = with_knowledge(changed, ["main"], {"sets": "source/b.tsv", "links": "source/c.tsv"})
    assert again.count("[analyses.main.pathways]") == 1
    assert "source/a.tsv" not in again


def test_a_network_without_edges_is_followed_to_empty_tables(tmp_path: Path) -> None:
    """Noise of 12 samples: every file is there, with its header, and the message says so."""
    random = np.random.default_rng(3)
    made = {
        name: pd.DataFrame(
            random.normal(size=(12, 8)),
            index=pd.Index([f"S{k}" for k in range(12)], name="sample"),
            columns=[f"{name[0]}{k}" for k in range(8)],
        )
        for name in ("rna", "lcms")
    }
    project = project_of(tmp_path / "noise", made)
    sets, links = tmp_path / "sets.gmt", tmp_path / "links.tsv"
    sets.write_text("P1\tone\tr0\tr1\tr2\tl0\tl1\tl2\nP2\ttwo\tr3\tr4\tr5\n")
    links.write_text("source\ttarget\nr0\tl0\n")
    add_knowledge(project.paths, (), sets, links)
    heard = Heard()
    folder = follow(project, heard)
    for file in ("followup", "pathways", "edge_correlations"):
        assert len(read_table(folder / f"{file}.tsv")) == 0
    assert read_table(folder / "known_links.tsv")["edge"].tolist() == [False]
    assert read_table(folder / "coherence.tsv")["edges"].tolist() == [0]
    assert any("no edges, so that there is nothing to follow" in line for line in heard.lines)
