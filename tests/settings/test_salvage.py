"""Faults of several kinds are told in one go: what still holds of the settings is looked at as well."""

import pytest

from workbench.settings import independent_faults, salvaged_settings

GOOD = (
    '[samples]\nid = "sample"\ngroup = "grp"\n'
    '[blocks.a]\nfile = "source/a.tsv"\nlayer = "lipids"\nvalues = "log"\n'
    '[blocks.b]\nfile = "source/b.tsv"\nlayer = "proteins"\nvalues = "log"\n'
)


def salvaged(tmp_path, text):
    (tmp_path / "project.toml").write_text(text)
    return salvaged_settings(tmp_path / "project.toml")


def test_wrong_and_unknown_keys_are_left_out_and_the_rest_stays(tmp_path):
    text = GOOD.replace('group = "grp"', 'group = "grp"\najust = ["x"]\nkinds = { x = "sort" }')
    found = salvaged(tmp_path, text)
    assert found.samples.group == ("grp",)
    assert set(found.blocks) == {"a", "b"}
    assert found.samples.kinds == {}


def test_a_block_that_lacks_a_key_is_left_out_as_a_whole(tmp_path):
    assert set(salvaged(tmp_path, GOOD.replace('layer = "lipids"\n', "")).blocks) == {"b"}


@pytest.mark.parametrize(
    "text", ["[samples", GOOD.replace('id = "sample"', "id = 3"), "blocks = 3\nformat = 9"]
)
def test_nothing_is_salvaged_where_nothing_could_be_told(tmp_path, text):
    found = salvaged(tmp_path, text)
    assert found is None or not found.blocks


def test_faults_that_may_follow_from_what_was_left_out_are_not_told():
    faults = [
        "project.toml: samples.kinds.x: no adjust names it",
        "project.toml: samples.adjust: no column 'q'",
    ]
    assert independent_faults(faults) == [faults[1]]
