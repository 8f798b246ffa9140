"""What `show` says of a feature and of a pair, against the tables that it is told from."""

import json
import re

import numpy as np
import pandas as pd
import pytest

from workbench import Project
from workbench.workflow.network.doubts import doubts_of


@pytest.fixture(scope="module")
def edges(run_once):
    return pd.read_csv(run_once / "results" / "main" / "edges.tsv", sep="\t")


def test_a_feature_lists_its_partners(command, run_once, edges):
    name = edges["target"].value_counts().index[0]
    code, out, _ = command("show", name, "--project", run_once)
    assert code == 0
    assert f"{(edges['target'] == name).sum()} edges" in out
    assert set(edges.loc[edges["target"] == name, "source"].head(20)) <= set(out.split())


def test_a_pair_tells_the_numbers_of_its_edge(command, finished, edges):
    first = edges.iloc[0]
    code, out, err = command("show", first["target"], first["source"], "--project", finished)
    assert (code, f"an edge: r = {first['r']:.2f}" in out) == (0, True)
    written = [line.removeprefix("figure: ") for line in err.splitlines() if line.startswith("figure: ")]
    assert [path[-4:] for path in written] == [".svg", ".png"]
    assert command("run", "--project", finished)[0] == 0


def test_what_is_left_after_adjustment_has_the_correlation_of_the_edge(run_once, edges):
    project = Project.open(run_once)
    for row in edges.head(5).itertuples():
        [story] = project.show(row.source, row.target)
        np.testing.assert_allclose(story.numbers["r_adjusted"], row.r, atol=1e-8)


def test_a_pair_without_an_edge_is_no_evidence_of_none(command, finished, edges):
    joined = set(zip(edges["source"], edges["target"], strict=True))
    source, target = next(
        (s, t)
        for s in sorted(set(edges["source"]))
        for t in sorted(set(edges["target"]))
        if (s, t) not in joined
    )
    code, out, _ = command("show", source, target, "--json", "--project", finished)
    [story] = json.loads(out)["stories"]
    assert code == 0
    assert any(line.startswith(("no edge: r = ", "an edge")) for line in story["reading"])


def test_names_that_are_not_there_are_answered_with_the_nearest(command, run_once, edges):
    name = str(edges["source"].iloc[0])
    code, _, err = command("show", name + "x", "--project", run_once)
    assert (code, f"did you mean '{name}'" in err or "did you mean" in err) == (2, True)
    code, _, err = command("show", *sorted(set(edges["source"]))[:2], "--project", run_once)
    assert (code, "are of one layer (transcripts)" in err) == (2, True)


def test_a_figure_goes_where_it_is_asked_for(command, run_once, edges, tmp_path):
    pair = (edges["source"].iloc[0], edges["target"].iloc[0])
    assert command("show", *pair, "--figure", tmp_path / "a.png", "--project", run_once)[0] == 0
    assert (tmp_path / "a.png").read_bytes()[:4] == b"\x89PNG"
    code, _, err = command("show", *pair, "--figure", tmp_path / "a.gif", "--project", run_once)
    assert (code, "allowed: .svg, .png" in err) == (2, True)


def test_before_a_run_the_way_out_is_named(command, made):
    code, _, err = command("show", "x", "--project", made)
    assert (code, re.search("run `workbench run main` first", err) is not None) == (2, True)


SOUND = {
    "r": 0.8,
    "r_without_one": 0.75,
    "r_spearman": 0.78,
    "q": 1e-4,
    "q_block": 1e-4,
    "imputed_share": 0.0,
}
DOUBTS = [
    ({"r_without_one": -0.1}, "without it r falls to -0.10"),
    ({"r_spearman": 0.3}, "on ranks it is only 0.30"),
    ({"imputed_share": 0.4, "r_observed": 0.7}, "for 40 % of the samples; without those r is 0.70"),
    ({"imputed_share": 0.9, "r_observed": None}, "too few samples are left"),
    ({"stability": 0.2}, "only 20 % of the half-samples"),
    ({"q_block": 0.04}, "close to the limit of 0.05"),
    ({"support": "module"}, "its module carries it, its own test does not"),
]


@pytest.mark.parametrize(("change", "told"), DOUBTS, ids=range(len(DOUBTS)))
def test_each_doubt_is_raised_by_its_own_figure(change, told):
    assert doubts_of(SOUND, 0.05) == []
    [doubt] = doubts_of({**SOUND, **change}, 0.05)
    assert told in doubt
