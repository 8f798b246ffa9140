"""A layer that is most likely misspelt is refused with the word meant; one of the user's own needs a word for it."""

import pytest

from workbench.errors import SettingsError
from workbench.settings import LAYERS, parse_settings
from workbench.settings.layers import edits, layer_fault, layer_meant

BLOCK = '[blocks.a]\nfile = "source/a.tsv"\nlayer = "{}"\nvalues = "log"\n'


@pytest.mark.parametrize(
    ("word", "meant"),
    [
        ("transcritps", "transcripts"),
        ("transcript", "transcripts"),
        ("Metabolites", "metabolites"),
        ("metabolits", "metabolites"),
        ("protiens", "proteins"),
        ("lipidome", "lipids"),
        ("proteomics", "proteins"),
        ("microbiome", "microbes"),
        ("methylome", "methylation"),
        ("clincal", "clinical"),
    ],
)
def test_a_misspelt_layer_is_known_again(word, meant):
    assert layer_meant(word) == meant
    with pytest.raises(SettingsError, match=rf"blocks.a.layer: '{word}' is no layer; did you mean '{meant}'"):
        parse_settings(BLOCK.format(word))


@pytest.mark.parametrize(
    "word", [*LAYERS, "phosphoproteins", "glycoproteins", "acetylation", "mirna", "phenotypes"]
)
def test_known_layers_and_words_of_their_own_are_no_misspellings(word):
    assert layer_fault(word, own=False) is None
    assert parse_settings(BLOCK.format(word)).blocks["a"].layer == word


def test_a_word_like_a_known_layer_is_taken_where_a_person_insists():
    own = parse_settings(BLOCK.format("lipid") + "own_layer = true\n").blocks["a"]
    assert (own.layer, own.own_layer) == ("lipid", True)
    with pytest.raises(SettingsError, match=r"'\.\./x' is not a name"):
        parse_settings(BLOCK.format("../x") + "own_layer = true\n")


def test_edits_are_those_of_the_textbook():
    """Optimal string alignment: ``ca`` to ``abc`` is 3, where touching letters twice would make it 2."""
    assert edits("kitten", "sitting") == 3
    assert edits("ca", "abc") == 3
    assert edits("same", "same") == 0
