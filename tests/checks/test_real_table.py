"""Real tables raise no error and hardly a warning.

198 patients with 76 transcripts and clinical readings: Desmedt et al. 2007, Clinical Cancer Research 13:3207,
as it ships with scikit-survival.
"""

from __future__ import annotations

from pathlib import Path

import pandas as pd
from checks.studies import ALONE, measured_of, prepared_of
from sksurv.datasets import load_breast_cancer

from workbench.checks import run_checks, study_data
from workbench.settings import parse_settings

SETTINGS = """
[samples]
group = "er"
[blocks.transcripts]
file = "source/a.tsv"
layer = "transcripts"
values = "log"
[blocks.clinical]
file = "source/b.tsv"
layer = "clinical"
values = "mixed"
"""


def test_a_cohort_of_198_patients_raises_no_error_and_at_most_two_warnings():
    table = load_breast_cancer()[0].set_axis([f"P{k:03d}" for k in range(198)])
    sheet = pd.DataFrame({"er": table["er"].astype(str)}).rename_axis("sample")
    clinical = pd.DataFrame({name: table[name].astype(object) for name in ("age", "grade", "size")})
    clinical[["age", "size"]] = clinical[["age", "size"]].astype(float)
    settings = parse_settings(SETTINGS, Path("project.toml"))
    genes = table[[name for name in table if name.startswith("X")]].astype(float)
    measured = {"transcripts": measured_of(genes, sheet), "clinical": measured_of(clinical, sheet)}
    prepared = {
        name: prepared_of(measured[name], own.layer, own.values) for name, own in settings.blocks.items()
    }
    found = run_checks(study_data(settings, sheet, measured, prepared), checks=ALONE)
    assert [finding.id for finding in found if finding.severity == "error"] == []
    assert len([finding for finding in found if finding.severity == "warning"]) <= 2
