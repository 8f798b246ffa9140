"""Edits change what is meant and leave every other byte as it is."""

import tomllib

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from workbench.errors import InputError, SettingsError
from workbench.settings.edit import add_block, new_project, remove_block, set_samples
from workbench.settings.load import parse_settings
from workbench.settings.statements import joined, statements

TEXT = '''# my study, do not lose this line
format   =  1      # as it is

[study]
title = "Drought"   # working title
question = """
[blocks.not_a_table]
group = "not a key"
"""

[samples]
id = "sample"  # first column
# group = "condition"   (not yet)

[blocks.rna]   # plate 1
file = "source/rna.tsv"
layer = 'transcripts'
values="counts"
exclude = { S1 = "haemolysed" }   # see the log book
# samples_in = "columns"

# the analyses of the paper
[analyses.main]
blocks = [
  "rna",   # first
  "lcms",  # second
]
seed = 3

[blocks.lcms]
file = "source/lcms.tsv"
layer = "metabolites"
values = "intensities"
adjust = [ "plate" ]

# the end'''

ENTRIES = {"file": "source/x.tsv", "layer": "lipids", "values": "log"}


def lines_kept(before, after):
    """Return whether every line of a text stands in the other, in order."""
    rest = iter(line.rstrip("\r") for line in after.split("\n"))
    kept = before.rstrip("\r\n")
    return all(line.rstrip("\r") in rest for line in kept.split("\n")) or not kept


def test_statements_joined_are_the_text():
    found = statements(TEXT)
    assert joined(found) == TEXT
    headers = [".".join(s.table) for s in found if s.kind == "header"]
    assert headers == ["study", "samples", "blocks.rna", "analyses.main", "blocks.lcms"]


def test_a_new_project_is_valid_and_holds_its_title():
    for title in ("Drought", 'with "quotes" \\ and\nlines', "ünï", ""):
        settings_read = parse_settings(new_project(title))
        assert settings_read.study.title == title
        assert settings_read.blocks == {}


def test_samples_are_set_beside_comments():
    after = set_samples(
        TEXT, id="tube", group="condition", adjust=["age", "batch"], kinds={"batch": "classes"}
    )
    expected = TEXT.replace('id = "sample"  # first', 'id = "tube"  # first').replace(
        "(not yet)\n",
        '(not yet)\ngroup = "condition"\nadjust = ["age", "batch"]\nkinds = {batch = "classes"}\n',
    )
    assert after == expected


def test_samples_that_are_not_named_stay():
    text = '[samples]\ngroup = "a" # why\nadjust = ["b"]\nkinds = { b = "number" } # told\n'
    assert set_samples(text) == text
    assert set_samples(text, group=[], adjust=(), subject="", kinds={}) == text
    assert set_samples(text, group=["a"], adjust=["b"]) == text
    after = set_samples(text, group=["a", "c"], kinds={"d": "classes"})
    assert after.startswith('[samples]\ngroup = ["a", "c"] # why\nadjust = ["b"]\n')
    assert tomllib.loads(after)["samples"]["kinds"] == {"b": "number", "d": "classes"}
    assert after.endswith("# told\n")


def test_kinds_in_a_table_of_their_own_are_set_there():
    text = "[samples]\nid = 's'\n\n[samples.kinds]\na = 'number'  # kept\n\n[blocks]\n"
    after = set_samples(text, kinds={"b": "classes"})
    assert after == text.replace("# kept\n", '# kept\nb = "classes"\n')


def test_a_block_goes_behind_the_other_blocks_and_before_the_analyses():
    text = new_project("x")
    text = add_block(text, "rna", ENTRIES)
    assert text.endswith('\n\n[blocks.rna]\nfile = "source/x.tsv"\nlayer = "lipids"\nvalues = "log"\n')
    assert "analyses" not in tomllib.loads(text)
    text = add_block(text, "lcms", ENTRIES)
    assert text.endswith('\n\n[analyses.main]\nblocks = "all"\n')
    text = add_block(text, "third", {**ENTRIES, "exclude": {"S 1": "lost"}, "adjust": ("a",)})
    data = tomllib.loads(text)
    assert list(data["blocks"]) == ["rna", "lcms", "third"]
    assert data["blocks"]["third"]["exclude"] == {"S 1": "lost"}
    assert text.index("[blocks.third]") < text.index("[analyses.main]")
    parse_settings(text)


def test_a_block_is_added_without_touching_another_byte():
    after = add_block(TEXT, "third", ENTRIES)
    added = '\n[blocks.third]\nfile = "source/x.tsv"\nlayer = "lipids"\nvalues = "log"\n'
    assert after == TEXT.replace('adjust = [ "plate" ]\n', 'adjust = [ "plate" ]\n' + added)
    assert parse_settings(after).analyses["main"].blocks == ("rna", "lcms")


def test_a_comment_above_the_analyses_stays_above_them():
    text = TEXT[: TEXT.index("\n[blocks.lcms]")]
    after = add_block(text.replace('  "lcms",  # second\n', ""), "third", ENTRIES)
    assert '# samples_in = "columns"\n\n[blocks.third]\n' in after
    assert 'values = "log"\n\n# the analyses of the paper\n[analyses.main]\n' in after


def test_entries_of_a_block_that_is_there_are_replaced_and_others_stay():
    after = add_block(TEXT, "lcms", {"file": "source/new.tsv", "adjust": None, "samples_in": "rows"})
    expected = TEXT.replace("source/lcms.tsv", "source/new.tsv").replace(
        'adjust = [ "plate" ]\n', 'samples_in = "rows"\n'
    )
    assert after == expected


def test_the_analysis_comes_with_the_second_block_alone():
    one = add_block("", "a", ENTRIES)
    two = add_block(one, "b", ENTRIES)
    assert tomllib.loads(two)["analyses"] == {"main": {"blocks": "all"}}
    without = two[: two.index("[analyses.main]")]
    assert "analyses" not in tomllib.loads(add_block(without, "c", ENTRIES))
    assert "analyses" not in tomllib.loads(add_block(one, "a", ENTRIES))
    mine = one + '\n[analyses.mine]\nblocks = ["a"]\n'
    assert list(tomllib.loads(add_block(mine, "b", ENTRIES))["analyses"]) == ["mine"]


def test_a_removed_block_leaves_lists_and_every_other_line():
    after = remove_block(TEXT, "lcms")
    expected = TEXT.replace(TEXT[TEXT.index("[blocks.lcms]") : TEXT.index("# the end")], "").replace(
        '  "lcms",  # second\n', ""
    )
    assert tomllib.loads(after) == tomllib.loads(expected)
    assert lines_kept(after, TEXT)
    assert "# first" in after
    assert after.endswith("\n\n# the end")
    assert tomllib.loads(after)["analyses"]["main"]["blocks"] == ["rna"]


def test_comments_above_a_removed_block_stay():
    text = "# about a\n[blocks.a]\nfile = 'x' # x\n[blocks.a.prepare]\nz = 1\n\n# about b\n[blocks.b]\nfile = 'y'\n"
    assert remove_block(text, "a") == "# about a\n\n# about b\n[blocks.b]\nfile = 'y'\n"
    assert tomllib.loads(remove_block(remove_block(text, "a"), "b")) == {}


def test_adding_and_removing_a_block_gives_the_text_back():
    assert remove_block(add_block(TEXT, "third", ENTRIES), "third") == TEXT
    text = add_block(new_project("x"), "a", ENTRIES)
    assert remove_block(text, "a") == new_project("x")


def test_an_unknown_block_cannot_be_removed():
    with pytest.raises(
        InputError, match="block 'rma' is not in the project; its blocks: 'rna', 'lcms'; did you mean 'rna'"
    ):
        remove_block(TEXT, "rma")
    with pytest.raises(InputError, match="its blocks: none"):
        remove_block("", "a")


def test_names_are_checked_before_they_are_written():
    for name in ("look", "a b", "a]\nx = 1\n[b"):
        with pytest.raises(InputError, match="name of the block"):
            add_block(TEXT, name, ENTRIES)


def test_windows_line_ends_and_a_byte_order_mark_stay():
    text = "\ufeff" + TEXT.replace("\n", "\r\n")
    after = set_samples(add_block(text, "third", ENTRIES), group="condition", kinds={"a": "number"})
    assert after.startswith("\ufeff# my study")
    assert after.count("\n") == after.count("\r\n")
    assert lines_kept(text, after)
    assert parse_settings(after).blocks["third"].layer == "lipids"
    assert remove_block(after, "third").count("\r\n") == text.count("\r\n") + 2


def test_unusual_layouts_are_edited_too():
    dotted = 'study.title = "x"\nsamples.id = "s"\nblocks.a.file = "f"\nblocks.a.layer = "lipids"\n'
    after = set_samples(dotted, id="t", group="g", kinds={"a": "number"})
    assert tomllib.loads(after)["samples"] == {"id": "t", "group": "g", "kinds": {"a": "number"}}
    inline = (
        'blocks = { a = { file = "f" }, b = { file = "g" } }\nanalyses = { m = { blocks = ["a", "b"] } }\n'
    )
    assert tomllib.loads(add_block(inline, "c", {"file": "h"}))["blocks"]["c"] == {"file": "h"}
    removed = tomllib.loads(remove_block(inline, "a"))
    assert removed == {"blocks": {"b": {"file": "g"}}, "analyses": {"m": {"blocks": ["b"]}}}


def test_what_cannot_be_edited_safely_is_told_with_the_lines_to_write(monkeypatch):
    def broken(*_):
        return "study = 1\n"

    monkeypatch.setattr("workbench.settings.edit.spliced", broken)
    monkeypatch.setattr("workbench.settings.edit._set_by_tomlkit", broken)
    told = r'cannot edit; write by hand: \[samples\] group = "condition"'
    with pytest.raises(SettingsError, match=told):
        set_samples(TEXT, group="condition")


def test_a_text_that_is_not_toml_is_not_edited():
    for edit in (lambda text: set_samples(text, id="x"), lambda text: remove_block(text, "a")):
        with pytest.raises(SettingsError, match="line 1, column 5"):
            edit("a = \n")


KEYS = st.sampled_from(["group", "adjust", "x", "id", '"odd key"'])
VALUES = st.sampled_from(
    [
        '"t"',
        "'l'",
        "3",
        "[1, 2]",
        "[\n  'a', # one\n]",
        "{ a = 1 }",
        '"""\n[samples]\nid = 1\n"""',
        "2026-01-02",
    ]
)
SPACE = st.sampled_from(["", " ", "\t"])
COMMENT = st.sampled_from(["", " # why", "#[blocks.x]"])
FILLERS = st.lists(st.sampled_from(["", "# a comment", "  # [blocks.a]", "\t"]), max_size=2)
TABLES = st.permutations(
    ["study", "samples", "blocks.a", "blocks.b.deep", '"blocks" . "c"', "analyses.main", "other"]
)


@st.composite
def texts(draw):
    """Draw a TOML text of tables in any order, with comments, odd spaces and values over several lines."""
    lines = draw(FILLERS)
    for table in draw(TABLES)[: draw(st.integers(0, 7))]:
        lines.append(f"{draw(SPACE)}[{table}]{draw(COMMENT)}")
        for key in draw(st.lists(KEYS, unique=True, max_size=3)):
            lines += draw(FILLERS)
            lines.append(f"{draw(SPACE)}{key}{draw(SPACE)}={draw(SPACE)}{draw(VALUES)}{draw(COMMENT)}")
        lines += draw(FILLERS)
    return draw(st.sampled_from(["\n", "\r\n"])).join(lines) + draw(st.sampled_from(["", "\n"]))


@settings(max_examples=150, deadline=None)
@given(text=texts(), title=st.text(max_size=20), reason=st.text(max_size=10))
def test_any_text_is_edited_as_meant_and_keeps_its_lines(text, title, reason):
    before = tomllib.loads(text)
    after = add_block(text, "new-1", {"file": title, "exclude": {reason: reason}, "adjust": [title]})
    data = tomllib.loads(after)
    assert data["blocks"].pop("new-1") == {"file": title, "exclude": {reason: reason}, "adjust": [title]}
    before.setdefault("blocks", {})
    if "analyses" not in before and len(before["blocks"]) == 1:
        assert data.pop("analyses") == {"main": {"blocks": "all"}}
    assert data == before
    assert lines_kept(text.rstrip("\r\n"), after)


@settings(max_examples=150, deadline=None)
@given(text=texts(), names=st.lists(st.text(max_size=8), max_size=3))
def test_any_text_takes_samples_and_keeps_all_other_lines(text, names):
    before = tomllib.loads(text)
    after = set_samples(text, adjust=names, id="tube")
    expected = before.get("samples", {}) | {"id": "tube"} | ({"adjust": names} if names else {})
    data = tomllib.loads(after)
    assert data.pop("samples") == expected
    before.pop("samples", None)
    assert data == before


@settings(max_examples=100, deadline=None)
@given(text=texts())
def test_any_block_is_removed_and_all_other_lines_stay(text):
    before = tomllib.loads(text)
    for name in list(before.get("blocks", {})):
        after = remove_block(text, name)
        expected = {key: value for key, value in before["blocks"].items() if key != name}
        data = tomllib.loads(after)
        assert data.pop("blocks", {}) == expected
        assert data == {key: value for key, value in before.items() if key != "blocks"}
        assert lines_kept(after, text)


def test_a_list_of_tables_is_written_on_one_line():
    entries = {"file": "source/a.tsv", "swap": [{"samples": ["S1", "S2"], "reason": "labels"}]}
    text = add_block(new_project("x"), "a", entries)
    assert '\nswap = [{samples = ["S1", "S2"], reason = "labels"}]\n' in text
    assert tomllib.loads(text)["blocks"]["a"] == entries


def test_subject_and_time_stand_beside_the_group():
    text = set_samples(new_project("t"), group="dose", subject="donor", time="day")
    samples = parse_settings(text).samples
    assert (samples.group, samples.subject, samples.time) == (("dose",), "donor", "day")
