"""``[blocks.NAME.prepare]``: defaults by layer and values, and what each fault is told as."""

import pytest
from pydantic import ValidationError

from workbench.errors import SettingsError
from workbench.settings import parse_settings, prepare_keys, prepare_settings, toml_text
from workbench.settings.prepare_schema import PrepareSettings, preparation_model

KINDS = ("counts", "proportions", "intensities", "log", "beta", "continuous", "mixed")
BLOCK = (
    '[blocks.b]\nfile = "source/b.tsv"\nlayer = "{layer}"\nvalues = "{values}"\n[blocks.b.prepare]\n{lines}'
)


def faults(layer, values, table):
    with pytest.raises(SettingsError, match="prepare") as caught:
        prepare_settings(layer, values, table)
    return list(caught.value.faults)


@pytest.mark.parametrize("values", KINDS)
def test_an_empty_table_gives_the_defaults_and_every_key_may_be_written_out(values):
    plain = prepare_settings("a layer", values, {})
    assert plain == preparation_model("a layer", values)()
    lines = "\n".join(f"{key.key} = {key.default}" for key in prepare_keys("layer", values))
    settings = parse_settings(BLOCK.format(layer="layer", values=values, lines=lines))
    assert settings.blocks["b"].prepare == plain


@pytest.mark.parametrize("values", KINDS)
def test_every_key_says_what_is_allowed_and_why(values):
    for key in prepare_keys("a layer", values):
        assert len(key.reason) > 40
        assert key.default
        assert key.allowed.strip()


def test_microbes_are_compositions_whether_counted_or_not():
    assert [key.key for key in prepare_keys("microbes", "counts")] == [
        "prevalence",
        "zero_share",
        "log_ratio",
    ]
    assert prepare_keys("microbes", "proportions") == prepare_keys("microbes", "counts")
    assert "normalisation" in {key.key for key in prepare_keys("transcripts", "counts")}


def test_all_faults_come_at_once_with_the_nearest_spelling():
    lines = faults(
        "metabolites", "intensities", {"drfit": "none", "zeros": "mising", "span": 1.5, "fewest_pools": 6.5}
    )
    assert len(lines) == 4
    told = "\n".join(lines)
    assert "project.toml: prepare.drfit: unknown key; allowed: blank_ratio, " in told
    assert "did you mean 'drift'?" in told
    assert (
        "prepare.zeros: 'mising' is not allowed; allowed: 'missing', 'amounts'; did you mean 'missing'?"
        in told
    )
    assert "prepare.span: 1.5 is out of range; allowed: above 0 and up to 1" in told
    assert "prepare.fewest_pools: must be a whole number, got 6.5" in told


def test_a_key_of_another_kind_of_values_is_told_as_such():
    [line] = faults("transcripts", "counts", {"drift": "pools"})
    assert line.endswith(
        "drift: is for values 'intensities' or 'log', not for 'counts' of layer 'transcripts'; take it out"
    )


def test_faults_inside_the_file_carry_the_whole_key():
    text = BLOCK.format(layer="transcripts", values="counts", lines='prior_count = 0\nnormalisation = "tmm"')
    with pytest.raises(SettingsError, match=r"project\.toml") as caught:
        parse_settings(text)
    one, other = sorted(caught.value.faults)
    assert one.startswith(
        "project.toml: blocks.b.prepare.normalisation: 'tmm' is not allowed; allowed: 'median_of_"
    )
    assert other == "project.toml: blocks.b.prepare.prior_count: 0 is out of range; allowed: above 0"


def test_a_wrong_layer_or_kind_is_told_alone():
    text = BLOCK.format(layer="transcripts", values="count", lines='normalisation = "none"')
    with pytest.raises(SettingsError, match=r"blocks.b.values: 'count' is not allowed") as caught:
        parse_settings(text)
    assert len(caught.value.faults) == 1


def test_features_and_levels_are_lists_of_text():
    settings = prepare_settings(
        "clinical",
        "mixed",
        {"ordered": {"grade": ["low", "high"]}, "transform": "log", "transform_features": ["crp"]},
    )
    assert settings.model_dump()["ordered"] == {"grade": ("low", "high")}
    [line] = faults("clinical", "mixed", {"ordered": {"grade": ["low"]}})
    assert (
        line
        == "project.toml: prepare.ordered.grade: must be two or more different levels, lowest first, got ['low']"
    )
    [line] = faults("clinical", "continuous", {"transform_features": "some"})
    assert (
        'must be "all", "skewed" or a list of features, got \'some\'; allowed: "all", "skewed", ["a", "b"]'
        in line
    )
    [line] = faults("clinical", "continuous", [])
    assert line == "project.toml: prepare: must be a table of keys, got []"


def test_settings_cannot_be_changed_and_are_written_out_in_full():
    settings = parse_settings(BLOCK.format(layer="methylation", values="beta", lines="offset = 0.01"))
    assert settings.blocks["b"].model_dump()["prepare"] == {"seen_share": 0.7, "offset": 0.01}
    with pytest.raises(ValidationError, match="frozen"):
        settings.blocks["b"].prepare.offset = 0.1


def test_settings_given_as_such_are_kept_when_they_fit():
    one = prepare_settings("x", "beta", {"offset": 0.05})
    assert prepare_settings("x", "beta", one) is one
    assert prepare_settings("x", "log", PrepareSettings()) == prepare_settings("x", "log", {})


def test_values_as_toml():
    assert toml_text({"a b": ("x", 'y"')}) == '{ "a b" = ["x", "y\\""] }'
    assert toml_text(()) == "[]"
