"""Multi-block PLS in a project: what comes out, what never predicts, and what stops it."""

import h5py
import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from supervised_projects import cohort, integrate, set_analysis, table

from workbench.errors import InputError, WorkbenchError
from workbench.intake.faults import counted
from workbench.workflow.network.feature_table import canonical_correlations, implied_correlations
from workbench.workflow.supervised.supervised_leaks import chance_of_parting, parts_classes


@pytest.fixture(scope="module")
def classes(tmp_path_factory):
    """Return a project with two classes, integrated once, and what it said; only read."""
    project = cohort(tmp_path_factory.mktemp("classes") / "A", 1)
    return project, integrate(project, figures=True)


def value(project, model, measure):
    rows = table(project, "performance")
    return rows.loc[(rows["model"] == model) & (rows["measure"] == measure), "value"].iloc[0]


def test_the_planted_classes_are_told_apart_out_of_sample(classes):
    project, lines = classes
    assert value(project, "all blocks", "balanced_accuracy") > 0.8
    assert value(project, "all blocks", "auc") > value(project, "nuisance alone", "auc") + 0.2
    assert value(project, "panel", "balanced_accuracy") > 0.75
    assert {"block rna alone", "block lcms alone"} <= set(table(project, "performance")["model"])
    assert table(project, "components")["p"].iloc[0] == pytest.approx(1 / 40)
    assert any(line.startswith("held out: balanced accuracy") for line in lines)
    assert any("order of levels: ill < well" in line for line in lines)


def test_the_panel_holds_planted_features_and_says_what_it_is_not(classes):
    project, lines = classes
    panel = table(project, "panel")
    planted = {f"g{k}" for k in range(12)} | {f"m{k}" for k in range(5)}
    assert panel["feature"].isin(planted).mean() >= 0.8
    assert panel["frequency"].between(0, 1).all()
    assert any("not a diagnostic test" in line for line in lines)


def test_every_sample_is_predicted_by_models_that_had_not_seen_it(classes):
    project, _ = classes
    rows = table(project, "predictions")
    assert len(rows) == 40
    assert_allclose(rows["probability ill"] + rows["probability well"], 1.0, atol=1e-8)
    assert (rows["predicted"] == rows["status"]).mean() > 0.75
    confusion = table(project, "performance").query("model == 'all blocks' and measure == 'samples'")
    assert confusion["value"].sum() == 40


def test_shares_and_figures_are_written(classes):
    project, _ = classes
    explained = table(project, "explained")
    importance = explained[explained["part"] == "importance"]
    assert_allclose(importance.groupby("component")["share"].sum(), 1.0, atol=1e-7)
    names = {path.name for path in (project.paths.analysis("main") / "figures/supervised").iterdir()}
    drawn = {"scores", "block_importance", "components", "roc", "features", "permutations"}
    assert {f"{name}.{end}" for name in drawn for end in ("png", "svg")} | {"captions.tsv"} == names


def test_the_model_file_implies_correlations_between_layers(classes):
    """Features raised in the same class correlate by the model; its sum over orthogonal scores is at most 1."""
    project, _ = classes
    features = canonical_correlations(project.state(), "main")
    ends = [("rna", "g1", "lcms", "m1"), ("rna", "g100", "lcms", "m30"), ("rna", "lost", "lcms", "m30")]
    edges = pd.DataFrame(ends, columns=["source_block", "source", "target_block", "target"])
    found = implied_correlations(edges, features)
    assert found["model_r"].iloc[0] > 0.2
    assert abs(found["model_r"].iloc[1]) < found["model_r"].iloc[0]
    assert np.isnan(found["model_r"].iloc[2])
    with h5py.File(project.paths.analysis("main") / "model.h5") as file:
        assert file.attrs["method"] == "multiblock_pls"
        assert set(file["blocks"]) == {"rna", "lcms"}


def test_a_second_run_has_nothing_to_do_and_an_edited_outcome_makes_it_stale(classes, tmp_path):
    import shutil

    from workbench import Project

    shutil.copytree(classes[0].paths.root, tmp_path / "copy")
    project = Project.open(tmp_path / "copy")
    assert integrate(project) == []
    sheet = project.paths.samples
    sheet.write_text(sheet.read_text().replace("\till\t", "\tsick\t"))
    assert any("sick < well" in line for line in integrate(project))


def test_a_number_is_read_with_the_nuisance_apart(tmp_path):
    project = cohort(tmp_path / "A", 2, settings='method = "multiblock_pls"\noutcome = "reading"')
    lines = integrate(project)
    assert value(project, "all blocks", "q2_added") > 0.1
    assert value(project, "nuisance alone", "q2") < 0.1
    assert list(table(project, "components").columns) == ["component", "r2", "q2", "p", "chosen"]
    rows = table(project, "predictions")
    assert np.corrcoef(rows["reading"], rows["predicted"])[0, 1] > 0.3
    assert any(line.startswith("held out: Q2") for line in lines)


def test_a_block_may_be_the_outcome_and_then_predicts_nothing(tmp_path):
    project = cohort(tmp_path / "A", 3, settings='method = "multiblock_pls"\noutcome = "lcms"')
    integrate(project)
    assert set(table(project, "explained")["block"]) == {"rna", "lcms"}
    assert set(table(project, "explained").query("part == 'component'")["block"]) == {"rna"}
    assert value(project, "all blocks", "q2_added") > 0.0
    assert table(project, "panel").empty


def test_the_outcome_is_never_a_predictor(tmp_path):
    """A clinical block that holds the outcome by name, as an indicator, and under another name."""
    project = cohort(tmp_path / "A", 4, shift=0.0)
    frame = pd.read_csv(tmp_path / "A/samples.tsv", sep="\t", index_col=0)
    clinical = pd.DataFrame(
        {
            "Status": frame["status"],
            "code": (frame["status"] == "ill") * 2.0 + 1.0,
            "bmi": frame["dose"] * 2.0,
        }
    )
    clinical.rename_axis("sample").to_csv(tmp_path / "A/clinical.csv")
    project.add_block("clinic", tmp_path / "A/clinical.csv", layer="clinical", values="mixed")
    lines = integrate(project)
    assert any(line.startswith("clinic: Status=well, code not among the predictors") for line in lines)
    assert value(project, "all blocks", "balanced_accuracy") < 0.75
    assert value(project, "block clinic alone", "balanced_accuracy") < 0.75
    with h5py.File(project.paths.analysis("main") / "model.h5") as file:
        names = {name for block in file["blocks"].values() for name in block["feature"].asstr()[()]}
    assert not {"Status", "Status=well", "code"} & names


@pytest.fixture(scope="module")
def plain(tmp_path_factory):
    """Return a project for what is refused before anything is fitted."""
    project = cohort(tmp_path_factory.mktemp("plain") / "A", 5)
    project.prepare()
    return project


@pytest.mark.parametrize(
    ("lines", "said"),
    [
        ('outcome = "dose"', r"the whole numbers 1, 2, 3, which may be classes or a number; say which"),
        ('outcome = "status"\noutcome_kind = "number"', r"cells that are no numbers"),
        ('outcome = "age"', r"'age' is nuisance as well"),
    ],
)
def test_what_cannot_be_an_outcome_is_refused_with_the_way_out(plain, lines, said):
    set_analysis(plain, f'method = "multiblock_pls"\n{lines}')
    with pytest.raises(WorkbenchError, match=said):
        integrate(plain)


def test_three_classes_of_whole_numbers_once_someone_says_so(plain):
    set_analysis(plain, 'method = "multiblock_pls"\noutcome = "dose"\noutcome_kind = "classes"')
    lines = integrate(plain)
    assert any("order of levels: 1 < 2 < 3" in line for line in lines)
    assert any("not told from chance" in line or "p = " in line for line in lines)


def test_a_batch_that_is_the_class_stops_with_the_equation(tmp_path):
    """The naive study in which every case was run on one day."""
    status = np.repeat(["ill", "well"], 20)
    sheet = {"status": status, "day": np.where(status == "ill", "d2", "d1")}
    lines = 'method = "multiblock_pls"\noutcome = "status"'
    project = cohort(tmp_path / "A", 6, sheet=sheet, group=None, adjust=("day",), settings=lines)
    with pytest.raises(InputError, match=r"\(status=well\) = 1 - \(day=d2\) in all 40 samples"):
        integrate(project)


def test_repeated_subjects_are_kept_whole_and_the_question_is_asked(tmp_path):
    """The naive study with three samples of each patient: patients, not samples, are compared."""
    rng = np.random.default_rng(0)
    patient = np.repeat([f"p{k}" for k in range(14)], 3)
    status = np.repeat(rng.permutation(np.array(["ill", "well"] * 7)), 3)
    sheet = {"patient": patient, "status": status}
    project = cohort(tmp_path / "A", 7, 42, sheet=sheet, subject="patient", shift=0.0)
    with pytest.raises(InputError, match='level = "visits"'):
        integrate(project)
    set_analysis(project, 'method = "multiblock_pls"\noutcome = "status"\nlevel = "subjects"')
    lines = integrate(project)
    assert any(
        "subjects are compared, each by the mean of its samples: 14 subjects" in line for line in lines
    )
    assert any(line.startswith("few samples: 14 (7 in the smallest class)") for line in lines)
    set_analysis(project, 'method = "multiblock_pls"\noutcome = "status"\nlevel = "visits"')
    with pytest.raises(InputError, match='ask with level = "subjects"'):
        integrate(project)


def test_eight_against_eight_is_told_what_it_is(tmp_path):
    """The naive study of 16 with 20,000 genes: perfect in sample, chance held out, and the text says so."""
    project = cohort(tmp_path / "A", 8, 16, genes=20_000, shift=0.0, adjust=())
    lines = integrate(project)
    fit = next(line for line in lines if "in sample it explains" in line)
    assert int(fit.split("%")[0].split()[-1]) > 60
    assert "says nothing about other samples" in fit
    assert value(project, "all blocks", "balanced_accuracy") < 0.85
    assert any(line.startswith("few samples: 16 (8 in the smallest class) against ") for line in lines)
    assert any(line.startswith("not told from chance") for line in lines)


def test_samples_without_an_outcome_are_left_out_and_counted(tmp_path):
    status = np.array(["ill", "well"] * 20, dtype=object)
    status[:4] = ""
    project = cohort(tmp_path / "A", 9, sheet={"status": status}, group=None)
    lines = integrate(project)
    assert any(line == "4 samples left out: no value in column 'status'" for line in lines)
    assert len(table(project, "predictions")) == 36


@pytest.mark.parametrize(
    ("template", "outcome", "group"),
    [("two-classes", "condition", "condition"), ("numeric-outcome", "reading", ())],
)
def test_a_project_from_a_template_runs(classes, tmp_path, template, outcome, group):
    from workbench import Project

    delivered = classes[0].paths.root.parent
    sheet = pd.read_csv(delivered / "samples.tsv", sep="\t", index_col=0).rename(
        columns={"status": "condition"}
    )
    sheet.to_csv(tmp_path / "samples.tsv", sep="\t")
    project = Project.create(tmp_path / "study", title="From a template", template=template)
    project.add_samples(tmp_path / "samples.tsv", group=group, adjust=("age",))
    project.add_block("rna", delivered / "rna.tsv", layer="transcripts", values="counts")
    project.add_block("lcms", delivered / "lcms.csv", layer="metabolites", values="intensities")
    text = project.paths.settings.read_text()
    assert f'outcome = "{outcome}"' in text
    project.paths.settings.write_text(text.replace("repeats = 10", "repeats = 1\npermutations = 39"))
    lines = integrate(project)
    assert any(line.startswith("held out: ") for line in lines)


def test_a_feature_that_is_the_outcome_measured_again_is_suspected(tmp_path):
    """A gene of counts 50 in the ill and 900 in the well: its name gives nothing away, its values all."""
    project = cohort(tmp_path / "A", 4, lost=0, extra={"g200": {"ill": 50, "well": 900}})
    lines = integrate(project)
    assert any(line.startswith("1 feature alone tells the classes apart without a miss") for line in lines)
    assert any("g200 (rna)" in line for line in lines)


def test_parting_by_chance_is_not_suspected():
    """3 against 3 of 1,000 features of noise: a tenth of them part the classes, and nothing would be said."""
    codes = np.array([0, 0, 0, 1, 1, 1])
    values = np.random.default_rng(0).normal(size=(6, 1000))
    assert abs(parts_classes(values, codes).mean() - chance_of_parting(np.bincount(codes))) < 0.03


def test_words_for_one_and_many(classes):
    project, lines = classes
    count = len(table(project, "panel"))
    assert any(line.startswith(f"panel of {counted(count, 'feature')};") for line in lines)
    assert any(
        "99 permutations" in line or "39 permutations" in line
        for line in lines
        if line.startswith("panel of")
    )
    assert (
        0.0 < table(project, "performance").query("model == 'panel' and measure == 'auc'")["p"].iloc[0] <= 1.0
    )
