"""What layers share, from delivered tables to results: three layers with lacking samples, and changes of subjects."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from workbench import Project
from workbench.errors import DamageError
from workbench.workflow.model_file import model_at, read_model

SETTINGS = "[analyses.main]\nrepeats = 1\nfolds = 4\npermutations = 149"


def write_study(folder, sheet, tables, **samples):
    """Make a project of invented tables of kind ``log``; layers by the name of the table."""
    source = folder / "delivered"
    source.mkdir(parents=True)
    sheet.to_csv(source / "samples.tsv", sep="\t", index=False)
    project = Project.create(folder / "study")
    project.add_samples(source / "samples.tsv", **samples)
    for name, table in tables.items():
        table.to_csv(source / f"{name}.tsv", sep="\t", index_label="sample")
        project.add_block(name, source / f"{name}.tsv", layer=name, values="log")
    settings = folder / "study" / "project.toml"
    settings.write_text(settings.read_text().replace("[analyses.main]", SETTINGS))
    return settings


def table_of(ids, factor, width, rng, name):
    """One shared factor and one private on features with unit noise."""
    n = len(ids)
    values = 10 + rng.normal(size=(n, width)) + factor @ rng.normal(size=(1, width))
    values += rng.normal(size=(n, 1)) @ rng.normal(size=(1, width))
    return pd.DataFrame(values, index=ids, columns=[f"{name}{k}" for k in range(width)])


@pytest.fixture(scope="module")
def three(tmp_path_factory):
    """Three layers of 30 samples that share a factor; proteins lack five samples."""
    rng = np.random.default_rng(0)
    ids = [f"S{k:02d}" for k in range(30)]
    factor = 1.5 * rng.normal(size=(30, 1))
    sheet = pd.DataFrame({"sample": ids, "dose": np.round(10 * factor[:, 0], 3)})
    tables = {
        name: table_of(ids, factor, width, rng, name)
        for name, width in (("transcripts", 60), ("metabolites", 30), ("proteins", 40))
    }
    tables["proteins"] = tables["proteins"].drop(index=ids[:5])
    settings = write_study(tmp_path_factory.mktemp("three"), sheet, tables)
    project = Project.open(settings.parent)
    project.integrate("main")
    return settings.parent


def test_three_layers_share_one_axis(three):
    """Found, predicted out of sample, shared by all three, and followed to the sample sheet."""
    result = Project.open(three).result("main")
    first = result.components.iloc[0]
    assert first["p"] == pytest.approx(1 / 150)
    assert first["correlation_cv"] > 0.8
    assert first["layers"] == "transcripts, metabolites, proteins"
    goes = pd.read_csv(three / "results/main/association.tsv", sep="\t")
    assert goes.loc[(goes["column"] == "dose") & (goes["component"] == 1), "r2"].item() > 0.9
    text = (three / "results/main/canonical.txt").read_text()
    assert "variation shared by transcripts, metabolites and proteins" in text
    assert "proteins (40 features, 25 samples)" in text
    assert "component 1 goes with dose" in text


def test_the_account_adds_up_to_one_for_each_block(three):
    """Shared by all, by some, private and noise; the planted share of a factor of variance 2.25 on unit noise."""
    explained = Project.open(three).result("main").explained
    account = explained[explained["part"] != "component"]
    sums = account.groupby("block")["share"].sum()
    assert np.allclose(sums, 1.0)
    shared = account[account["part"] == "shared"].set_index("block")["share"]
    assert shared.between(0.25, 0.6).all()
    assert (explained[explained["part"] == "component"]["component"] >= 1).all()


def test_the_model_is_read_back_by_block(three):
    """Features with their correlations, variates of all units (a lacking sample empty), numbers of components."""
    project = Project.open(three)
    model = (
        read_model(project.state(), "main") if callable(project.state) else read_model(project.state, "main")
    )
    assert model.method == "generalised_cca"
    assert list(model.blocks) == ["metabolites", "proteins", "transcripts"]
    assert model.blocks["proteins"].own.shape == (40, model.correlation.size)
    assert np.isnan(model.layers["proteins"].scores[:5]).all()
    columns = model.feature_columns()
    assert columns.columns[:2].tolist() == ["pair1_own", "pair1_other"]
    assert columns.loc[("proteins", "proteins0")].notna().all()


def test_a_model_of_another_layout_is_damage(tmp_path):
    import h5py

    with h5py.File(tmp_path / "model.h5", "w") as file:
        file.attrs["format"] = 1
    with pytest.raises(DamageError, match="written by another version"):
        model_at(tmp_path / "model.h5")


def test_figures_have_captions(three):
    """Every figure that is drawn is described; they are written as SVG and PNG."""
    folder = three / "results/main/figures/canonical"
    captions = pd.read_csv(folder / "captions.tsv", sep="\t")
    drawn = {path.stem for path in folder.glob("*.svg")}
    assert drawn == set(captions["figure"]) == {path.stem for path in folder.glob("*.png")}
    assert {"correlations", "variates", "account", "association", "leading_features"} <= drawn


@pytest.mark.parametrize(
    ("level", "words"), [("visits", "differences between"), ("subjects", "means of subjects")]
)
def test_subjects_are_compared_by_the_level_asked_for(tmp_path, level, words):
    """A factor that changes within subjects is found in differences, and not among the means of equal subjects."""
    rng = np.random.default_rng(3)
    subject, visit = np.repeat(np.arange(16), 2), np.tile([0, 1], 16)
    change = 2.0 * rng.normal(size=16)
    factor = np.where(visit == 1, 1.0, -1.0)[:, None] * change[subject][:, None]
    ids = [f"S{k:02d}" for k in range(32)]
    sheet = pd.DataFrame({"sample": ids, "donor": [f"D{k}" for k in subject], "day": visit})
    tables = {
        name: table_of(ids, factor, width, rng, name)
        for name, width in (("transcripts", 40), ("metabolites", 20))
    }
    settings = write_study(tmp_path, sheet, tables, subject="donor", time="day")
    settings.write_text(
        settings.read_text().replace("[analyses.main]", f'[analyses.main]\nlevel = "{level}"')
    )
    project = Project.open(settings.parent)
    project.integrate("main")
    found = project.result("main").components
    text = (settings.parent / "results/main/canonical.txt").read_text()
    assert f"16 {words}" in text
    assert (found["p"].iloc[0] == pytest.approx(1 / 150)) == (level == "visits")


@pytest.mark.parametrize("remove", ["true", "false"])
def test_what_private_variation_buries_is_found_once_it_is_removed(tmp_path, remove):
    """Two weak shared factors under strong private ones: a second p and a sentence, and neither when not asked for."""
    rng = np.random.default_rng(5)
    ids = [f"S{k:02d}" for k in range(48)]
    shared = rng.normal(size=(48, 2))
    tables = {}
    for name, width, private, loaded in (("transcripts", 400, 5, 30), ("metabolites", 100, 3, 10)):
        values = 10 + rng.normal(size=(48, width))
        values += 1.5 * rng.normal(size=(48, private)) @ rng.normal(size=(private, width))
        for factor in shared.T:
            values[:, rng.choice(width, loaded, replace=False)] += factor[:, None]
        tables[name] = pd.DataFrame(values, index=ids, columns=[f"{name}{k}" for k in range(width)])
    settings = write_study(tmp_path, pd.DataFrame({"sample": ids}), tables)
    settings.write_text(settings.read_text() + f"\n[analyses.main.network]\nremove_private = {remove}\n")
    Project.open(settings.parent).integrate("main")
    found = Project.open(settings.parent).result("main").components
    text = (settings.parent / "results/main/canonical.txt").read_text()
    assert found["p"].iloc[0] > 0.05
    assert ("p_without_private" in found) == ("with private variation removed" in text) == (remove == "true")
    if remove == "true":
        assert found["p_without_private"].iloc[0] == pytest.approx(1 / 150)
        assert "is buried under private variation" in text
