"""Deliveries as they arrive: runs with pools and blanks, names that nearly match, a table that comes again."""

import numpy as np
import pandas as pd
import pytest

from workbench import Project

SAMPLES = [f"S{number:02d}" for number in range(1, 13)]


@pytest.fixture
def folder(tmp_path):
    """Return a folder with a sheet of 12 samples, and intensities of 2 runs each, 8 pools and 2 blanks."""
    rng = np.random.default_rng(3)
    features = [f"m{number:02d}" for number in range(30)]
    sheet = pd.DataFrame({"sample": SAMPLES, "group": ["a", "b"] * 6})
    sheet.to_csv(tmp_path / "sheet.tsv", sep="\t", index=False)
    level = rng.normal(16, 1.5, 30)
    biology = rng.normal(0, 1, (12, 30))
    rows, runs = [], []
    order = rng.permutation(24)
    for place in range(34):
        if place in range(0, 32, 4):
            rows.append(level + rng.normal(0, 0.05, 30))
            runs.append((f"pool{place}", "", "pool"))
        elif place in (2, 33):
            rows.append(level - 8 + rng.normal(0, 0.2, 30))
            runs.append((f"blank{place}", "", "blank"))
        else:
            sample = order[len([one for one in runs if one[2] == "sample"])] // 2
            rows.append(level + biology[sample] + rng.normal(0, 0.05, 30))
            runs.append((f"run{place}", SAMPLES[sample], "sample"))
    table = pd.DataFrame(2.0 ** np.array(rows), index=[run for run, _, _ in runs], columns=features)
    table.rename_axis("run").to_csv(tmp_path / "areas.csv")
    sheet = pd.DataFrame(runs, columns=["run", "sample", "role"])
    sheet["order"], sheet["batch"] = range(1, 35), ["b1"] * 17 + ["b2"] * 17
    sheet.to_csv(tmp_path / "runs.tsv", sep="\t", index=False)
    return tmp_path


@pytest.fixture(autouse=True)
def project(folder):
    project = Project.create(folder / "study")
    project.add_samples(folder / "sheet.tsv", group="group")
    return project


ADD = ("--layer", "metabolites", "--values", "intensities")


def test_runs_become_samples_and_pools_stay_out(command, folder, project):
    here = ("--project", folder / "study")
    code, out, err = command(
        "add-block", "lc", folder / "areas.csv", *ADD, "--runs", folder / "runs.tsv", *here
    )
    assert code == 0, err
    assert "24 runs of 12 samples" in out
    assert command("prepare", "lc", *here)[0] == 0
    table = project.export("lc")
    assert list(table["sample"]) == SAMPLES
    assert (folder / "study" / "source" / "runs.tsv").exists()
    assert command("look", "lc", *here)[0] == 0


def test_a_run_sheet_column_can_be_nuisance_and_an_unknown_one_is_refused(command, folder):
    here = ("--runs", folder / "runs.tsv", "--project", folder / "study")
    code, _, err = command("add-block", "lc", folder / "areas.csv", *ADD, "--adjust", "plate", *here)
    assert (code, "'plate'" in err, "batch" in err) == (2, True, True)
    assert command("add-block", "lc", folder / "areas.csv", *ADD, "--adjust", "order", *here)[0] == 0
    assert command("look", "lc", "--project", folder / "study")[0] == 0


def test_names_that_nearly_match_are_offered_and_used_only_when_accepted(command, folder, project):
    values = pd.DataFrame(np.random.default_rng(1).normal(size=(12, 5)).round(3), index=SAMPLES)
    values.index = [f"sample_{int(name[1:])}" for name in SAMPLES]
    values.columns = [f"p{number}" for number in range(5)]
    values.to_csv(folder / "log.csv", index_label="id")
    words = ("add-block", "prot", folder / "log.csv", "--layer", "proteins", "--values", "log")
    here = ("--project", folder / "study")
    code, _, err = command(*words, *here)
    assert (code, "--accept-names" in err, "sample_1" in err) == (2, True, True)
    assert not (folder / "study" / "blocks" / "prot.h5ad").exists()
    code, _, err = command(*words, "--accept-names", *here)
    assert code == 0, err
    names = folder / "study" / "source" / "prot_names.tsv"
    assert names.read_text().splitlines()[1] == "sample_1\tS01"
    assert 'names = "source/prot_names.tsv"' in (folder / "study" / "project.toml").read_text()
    names.write_text("\n".join(names.read_text().splitlines()[:-1]) + "\n")
    assert command("check", "--files", *here)[0] == 0
    assert command("prepare", "prot", *here)[0] == 0
    assert list(project.export("prot")["sample"]) == SAMPLES[:-1]


def test_a_table_that_comes_again_shows_what_changes_and_keeps_the_old_file(command, folder):
    here = ("--project", folder / "study")
    first = pd.DataFrame(np.random.default_rng(1).normal(size=(12, 5)).round(3), index=SAMPLES)
    first.columns = [f"p{number}" for number in range(5)]
    first.to_csv(folder / "log.csv", index_label="sample")
    words = ("add-block", "prot", folder / "log.csv", "--layer", "proteins", "--values", "log")
    assert command(*words, *here)[0] == 0
    settings = folder / "study" / "project.toml"
    settings.write_text(
        settings.read_text().replace('values = "log"', 'values = "log"\nexclude = { S03 = "thawed" }')
    )
    second = first.drop(index="S12").assign(p5=1.0)
    second.loc["S01", "p0"] = 99.0
    second.to_csv(folder / "log.csv", index_label="sample")
    assert command(*words, *here)[0] == 2
    code, out, err = command(*words, "--replace", *here)
    assert code == 0, err
    for piece in ("S12", "p5", "99"):
        assert piece in out
    assert {path.name for path in (folder / "study" / "source").glob("log*")} == {"log.csv", "log-2.csv"}
    text = settings.read_text()
    assert 'file = "source/log-2.csv"' in text
    assert 'exclude = { S03 = "thawed" }' in text
    assert command("run", *here)[0] == 0


def test_a_sheet_that_comes_again_shows_what_changes(command, folder):
    sheet = pd.read_csv(folder / "sheet.tsv", sep="\t").drop(index=11).assign(age=range(11))
    sheet.to_csv(folder / "sheet.tsv", sep="\t", index=False)
    here = ("--project", folder / "study")
    assert command("add-samples", folder / "sheet.tsv", "--group", "group", *here)[0] == 2
    code, out, err = command("add-samples", folder / "sheet.tsv", "--group", "group", "--replace", *here)
    assert code == 0, err
    assert "S12" in out
    assert "age" in out


def test_swapped_rows_are_put_right_when_the_settings_say_so(command, folder, project):
    here = ("--project", folder / "study")
    values = pd.DataFrame(np.arange(60.0).reshape(12, 5) % 7, index=SAMPLES, columns=list("vwxyz"))
    values.to_csv(folder / "log.csv", index_label="sample")
    assert (
        command(
            "add-block", "prot", folder / "log.csv", "--layer", "proteins", "--values", "continuous", *here
        )[0]
        == 0
    )
    settings = folder / "study" / "project.toml"
    swap = 'swap = [{ samples = ["S01", "S02"], reason = "labels exchanged" }]\n'
    settings.write_text(
        settings.read_text().replace('values = "continuous"', f'values = "continuous"\n{swap}')
    )
    assert command("prepare", *here)[0] == 0
    found = project.export("prot", values="measured").set_index("sample")
    assert list(found.loc["S01"]) == list(values.loc["S02"])
    assert list(found.loc["S02"]) == list(values.loc["S01"])
    assert list(found.loc["S03"]) == list(values.loc["S03"])
