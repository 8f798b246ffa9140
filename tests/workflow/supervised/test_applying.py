"""An analysis on a second cohort: frozen preparation and model, what is missing there, edges that replicate."""

import json

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from supervised_projects import cohort, integrate

from workbench.errors import InputError
from workbench.prepare import MeasuredTable
from workbench.store import Change, project_lock, table_bytes
from workbench.workflow.supervised.applied_missing import agreement
from workbench.workflow.supervised.applied_model import aligned_table
from workbench.workflow.supervised.applying import apply_analysis

EDGES = [
    *((f"g{12 + k}", "rna", f"m{5 + k % 8}", "lcms", 0.6) for k in range(12)),
    *((f"g{60 + k}", "rna", f"m{20 + k}", "lcms", 0.5) for k in range(10)),
    ("g0", "rna", "m1", "lcms", 0.5),
]


@pytest.fixture(scope="module")
def cohorts(tmp_path_factory):
    """Return two cohorts of one biology; the first is integrated and has a table of edges, the second lacks 4 genes."""
    folder = tmp_path_factory.mktemp("cohorts")
    first, second = cohort(folder / "A", 1, 60), cohort(folder / "B", 2, 50, lost=4)
    integrate(first)
    columns = ["source", "source_block", "target", "target_block", "r"]
    with project_lock(first.paths.root, "test"), Change(first.paths.root) as change:
        change.write_bytes("results/main/edges.tsv", table_bytes(pd.DataFrame(EDGES, columns=columns)))
        change.commit()
    second.prepare()
    return first, second


@pytest.fixture(scope="module")
def applied(cohorts):
    """Return what the first cohort's analysis says of the second."""
    return apply_analysis(cohorts[0].paths, "main", cohorts[1].paths.root)


def test_classes_of_the_second_cohort_are_predicted(applied):
    figures = applied.performance.set_index("measure")
    assert figures.loc["balanced_accuracy", "value"] > 0.75
    assert figures.loc["auc", "low"] > 0.6
    assert (figures["low"].dropna() <= figures.loc[figures["low"].notna(), "value"]).all()
    assert len(applied.predictions) == 50
    assert_allclose(applied.predictions.filter(like="probability").sum(axis=1), 1.0)


def test_features_that_are_missing_there_are_listed_with_their_weight(applied):
    assert set(applied.missing["feature"]) == {"g0", "g1", "g2", "g3"}
    assert (applied.missing["share"] > 0.0).all()
    said = next(line for line in applied.lines if line.startswith("not there: 4 features of the model's"))
    assert 0.9 < float(said.rpartition("r = ")[2]) <= 1.0


def test_levels_that_another_batch_moved_are_told_and_not_recentred(cohorts, applied, tmp_path):
    """Every second gene raised fourfold there: about half are listed; the same cohort as it was has next to none."""
    moved = cohort(tmp_path / "B", 2, 50, raised=4)
    moved.prepare()
    found = apply_analysis(cohorts[0].paths, "main", moved.paths.root, write=False)
    warning = [line for line in found.lines if line.startswith("levels there")]
    assert len(warning) == 1
    assert "block rna" in warning[0]
    assert "Nothing was recentred" in warning[0]
    assert found.shifted["block"].eq("rna").sum() > 0.35 * 120
    assert not any(line.startswith("levels there") for line in applied.lines)
    assert len(applied.shifted) < 0.1 * 160


def test_planted_edges_replicate_and_others_do_not(applied):
    edges = applied.edges
    assert edges["replicates"].iloc[:12].mean() > 0.8
    assert edges["replicates"].iloc[12:22].sum() <= 1
    assert edges["why_not_tried"].iloc[22] == "feature not there"
    assert np.isnan(edges["p"].iloc[22])
    tried = edges.iloc[:22]
    assert_allclose(tried["p"] < 0.5, tried["same_sign"])


def test_one_sided_p_is_that_of_the_partial_correlation(cohorts, applied):
    """By scipy on residuals: half the two-sided p where the sign agrees, the degrees of freedom less the nuisance."""
    from scipy import stats

    second = cohorts[1]
    frame = pd.read_csv(second.paths.samples, sep="\t", index_col=0)
    rna, lcms = (second.export(name).set_index("sample").loc[frame.index] for name in ("rna", "lcms"))
    design = np.column_stack([np.ones(len(frame)), frame["age"], frame["status"] == "well"]).astype(float)
    x, y = (
        values - design @ np.linalg.lstsq(design, values, rcond=None)[0]
        for values in (rna["g12"].to_numpy(), lcms["m5"].to_numpy())
    )
    r = stats.pearsonr(x, y).statistic
    row = applied.edges.iloc[0]
    assert_allclose(row["r_there"], r, atol=1e-9)
    freedom = len(frame) - 4
    assert_allclose(row["p"], stats.t.sf(r * np.sqrt(freedom / (1 - r**2)), freedom), rtol=1e-6)


def test_the_same_samples_get_the_fit_itself(tmp_path):
    """A copy of the project as the other one: predictions are the fit, nothing is missing, most classes agree."""
    import shutil

    first = cohort(tmp_path / "A", 3)
    integrate(first)
    shutil.copytree(first.paths.root, tmp_path / "twin")
    found = apply_analysis(first.paths, "main", tmp_path / "twin", write=False)
    assert found.missing.empty
    assert (found.predictions["predicted"] == found.predictions["status"]).mean() > 0.95


def test_numbers_come_in_their_unit(tmp_path):
    lines = 'method = "multiblock_pls"\noutcome = "reading"'
    first, second = (
        cohort(tmp_path / "A", 4, 60, settings=lines),
        cohort(tmp_path / "B", 5, 60, settings=lines),
    )
    integrate(first)
    second.prepare()
    found = apply_analysis(first.paths, "main", second.paths.root)
    figures = found.performance.set_index("measure")
    assert figures.loc["correlation", "low"] > 0.1
    assert abs(figures.loc["bias (observed less predicted)", "value"]) < 0.6
    assert abs(found.predictions["predicted"].mean() - 1.0) < 0.6


def test_the_command_answers_and_writes(cohorts, command):
    first, second = cohorts
    words = ("apply", "main", "--to", second.paths.root, "--project", first.paths.root)
    code, out, _ = command(*words)
    assert code == 0
    assert "balanced accuracy" in out
    folder = first.paths.analysis("main") / "applied" / "B_study"
    names = {path.name for path in folder.iterdir()}
    assert names == {
        f"{table}.tsv" for table in ("predictions", "performance", "missing", "shifted", "edges")
    } | {"applied.txt"}
    code, out, _ = command(*words, "--json")
    assert json.loads(out)["schema_version"] == 1
    assert first.check_files() == []


def test_what_cannot_be_applied_is_said(cohorts, tmp_path):
    first, second = cohorts
    with pytest.raises(InputError, match="the same project"):
        apply_analysis(first.paths, "main", first.paths.root)
    with pytest.raises(InputError, match="no such folder"):
        apply_analysis(first.paths, "main", tmp_path / "nowhere")
    with pytest.raises(InputError, match="has no results yet"):
        apply_analysis(second.paths, "main", first.paths.root)
    third = cohort(tmp_path / "C", 6)
    with pytest.raises(InputError, match="block 'rna' is not prepared there"):
        apply_analysis(first.paths, "main", third.paths.root)


def test_levels_of_text_are_read_by_their_names():
    """Codes of another table's levels become codes of the levels here; unknown ones and lost features are empty."""
    here = MeasuredTable(np.array([[0.0, 1.0]]), ("A",), ("grade", "bmi"), (("low", "high"), None))
    other = MeasuredTable(
        np.array([[0.0], [1.0], [2.0]]), ("X", "Y", "Z"), ("grade",), (("high", "low", "odd"),)
    )
    table, absent = aligned_table(here, other)
    np.testing.assert_array_equal(table.values, [[1.0, np.nan], [0.0, np.nan], [np.nan, np.nan]])
    assert absent == {"bmi"}
    assert table.levels == here.levels


def test_what_missing_features_cost_is_the_agreement_of_the_models_values():
    """Of two independent features of equal weight one is lost: r = sqrt(1/2); none lost: 1; all lost: 0."""
    x = np.array([[1.0, 1.0], [1.0, -1.0], [-1.0, 1.0], [-1.0, -1.0]])
    lost = [np.array(gone) for gone in ([False, True], [False, False], [True, True])]
    found = [agreement(x, np.ones((1, 2)), gone) for gone in lost]
    assert_allclose(found, [np.sqrt(0.5), 1.0, 0.0])
