"""The mishaps planted in the example are found as a first user meets them, and settled in the shipped one."""

import importlib.util
import shutil
from pathlib import Path

import pytest

from workbench import Project

EXAMPLE = Path(__file__).resolve().parents[2] / "example_project"


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    """Return the example as the first user has it, before any finding was settled, and the script that made it."""
    spec = importlib.util.spec_from_file_location("make_example", EXAMPLE / "make_example.py")
    script = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(script)
    folder = tmp_path_factory.mktemp("unsettled")
    (folder / "delivered").mkdir()
    script.deliver(folder / "delivered")
    script.build(folder / "delivered", folder / "study")
    return script, folder


def test_every_planted_mishap_is_found(made):
    script, folder = made
    found = Project.open(folder / "study").check()
    by_id = {row["id"]: row for row in found}
    assert script.DATES_FINDING in by_id
    assert f"outlier-metabolites-{script.THAWED}" in by_id
    assert "unnamed_batch-metabolites-extraction" in by_id
    swapped = [row for row in found if row["severity"] == "error"]
    assert [row["check"] for row in swapped] == ["swapped_samples"]
    assert (set(swapped[0]["samples"]), swapped[0]["block"]) == (set(script.SWAPPED), "metabolites")


def test_an_error_finding_stops_the_run_until_it_is_settled(made, command):
    _, folder = made
    code, _, err = command("run", "--project", folder / "study")
    assert (code, "swapped_samples-metabolites" in err) == (1, True)
    assert not (folder / "study" / "results" / "main").exists()


def test_the_shipped_example_ends_up_clean(tmp_path):
    kept = shutil.ignore_patterns("results", "blocks", "prepared", ".workbench")
    folder = shutil.copytree(EXAMPLE, tmp_path / "study", ignore=kept)
    found = Project.open(folder).check()
    open_ones = [row["id"] for row in found if row["severity"] != "note" and row["accepted"] is None]
    assert open_ones == []


def test_the_shipped_tables_are_those_that_the_script_makes(made):
    _, folder = made
    for file in ("plants.tsv", "counts.tsv", "metabolites.csv", "symbols_old.tsv"):
        assert (EXAMPLE / "source" / file).read_bytes() == (folder / "delivered" / file).read_bytes()
    assert (EXAMPLE / "planted.tsv").read_bytes() == (folder / "delivered" / "planted.tsv").read_bytes()
