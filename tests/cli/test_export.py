"""One block as a plain table."""

import io

import numpy as np
import pandas as pd
from numpy.testing import assert_allclose

from workbench import Project


def test_measured_values_come_out_as_they_were_delivered(command, made, delivered):
    code, out, err = command("export", "rna", "--values", "measured", "--project", made)
    assert (code, err) == (0, "")
    table = pd.read_csv(io.StringIO(out), sep="\t", index_col="sample")
    source = pd.read_csv(delivered["transcripts"], sep="\t", index_col=0).T
    assert_allclose(table.to_numpy(), source.loc[table.index, table.columns].to_numpy(), rtol=0, atol=0)


def test_prepared_values_are_those_of_the_block(command, finished):
    code, out, _ = command("export", "lcms", "--project", finished)
    table = pd.read_csv(io.StringIO(out), sep="\t", index_col="sample")
    assert code == 0
    assert not table.isna().any().any()
    again = Project.open(finished).export("lcms").set_index("sample")
    assert_allclose(table.to_numpy(), again.to_numpy(np.float64), rtol=1e-8)


def test_text_features_come_back_as_text(tmp_path):
    (tmp_path / "sheet.tsv").write_text("sample\nS1\nS2\nS3\n")
    (tmp_path / "clinic.csv").write_text("sample,age,smoker\nS1,40,yes\nS2,50,no\nS3,60,\n")
    project = Project.create(tmp_path / "study")
    project.add_samples(tmp_path / "sheet.tsv")
    project.add_block("clinic", tmp_path / "clinic.csv", layer="clinical", values="mixed")
    table = project.export("clinic", values="measured")
    assert list(table["smoker"]) == ["yes", "no", ""]
    assert list(table["age"]) == [40, 50, 60]


def test_an_unknown_kind_of_values_is_refused(command, made):
    code, _, err = command("export", "rna", "--values", "raw", "--project", made)
    assert (code, "allowed: prepared, measured" in err) == (2, True)
