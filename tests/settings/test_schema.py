"""What project.toml may hold, and what each fault is told as."""

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from workbench.errors import SettingsError
from workbench.settings.faults import key_text
from workbench.settings.load import load_settings, parse_settings, read_settings_text
from workbench.settings.names import check_name, hint, nearest
from workbench.settings.schema import AnalysisSettings, NetworkSettings, Settings

WHOLE = """
format = 1
[study]
title = "Drought"
organism = "Zea mays"
question = "Which metabolites follow?"
[samples]
id = "sample"
group = ["condition", "tissue"]
subject = "plant"
order = { condition = ["watered", "drought"] }
adjust = ["age", "batch"]
kinds = { batch = "classes", age = "number" }
exclude = { S07 = "haemolysed" }
[blocks.transcripts]
file = "source/counts.xlsx"
layer = "transcripts"
values = "counts"
samples_in = "columns"
sheet = "Table S2"
decimal = ","
names = "source/transcripts_names.tsv"
runs = "source/transcripts_runs.tsv"
annotations = "source/genes.tsv"
adjust = ["plate"]
exclude = { S08 = "low yield" }
swap = [{ samples = ["S03", "S31"], reason = "labels exchanged" }, { samples = ["a", "b", "c"], reason = "?" }]
[blocks.lipids_pos]
file = "source/lipids.h5ad"
array = "X"
layer = "my_layer"
values = "intensities"
[analyses.main]
blocks = ["lipids_pos", "transcripts"]
method = "ridge_cca"
ridge = [0.1, 1]
components = 2
folds = 4
repeats = 2
permutations = 200
seed = 7
[analyses.main.network]
correlation = "spearman"
fdr = 0.1
select = "total"
minimum_r = 0.3
maximum_edges = 10
[check]
accept = { "outlier-metabolites-S12" = "haemolysed, kept on purpose" }
"""


def faults_of(text):
    with pytest.raises(SettingsError, match=r"project.toml: ") as caught:
        parse_settings(text)
    return list(caught.value.faults)


def one_fault(text):
    [fault] = faults_of(text)
    return fault


def test_every_key_is_read():
    settings = parse_settings(WHOLE)
    assert settings.study.organism == "Zea mays"
    assert settings.samples.group == ("condition", "tissue")
    assert settings.samples.order == {"condition": ("watered", "drought")}
    assert settings.samples.kinds == {"batch": "classes", "age": "number"}
    assert settings.blocks["transcripts"].exclude == {"S08": "low yield"}
    assert settings.blocks["lipids_pos"].array == "X"
    analysis = settings.analyses["main"]
    assert (analysis.ridge, analysis.components, analysis.seed) == ((0.1, 1.0), 2, 7)
    assert analysis.network == NetworkSettings(
        correlation="spearman", fdr=0.1, select="total", minimum_r=0.3, maximum_edges=10
    )


def test_an_empty_file_is_a_project_with_the_stated_defaults():
    settings = parse_settings("")
    assert (settings.format, settings.samples.id, settings.samples.group) == (1, "sample", ())
    analysis = AnalysisSettings(blocks="all")
    assert (analysis.method, analysis.ridge, analysis.components) == ("auto", "auto", "auto")
    assert (analysis.folds, analysis.repeats, analysis.permutations, analysis.seed) == (5, 5, 1000, 20260101)
    network = analysis.network
    assert (network.correlation, network.fdr, network.select) == ("pearson", 0.05, "within")
    assert (network.minimum_r, network.maximum_edges) == (0.0, 20000)


def test_one_factor_may_be_written_as_a_text():
    assert parse_settings('[samples]\ngroup = "condition"').samples.group == ("condition",)


def test_an_analysis_takes_its_blocks_in_the_order_of_the_file():
    settings = parse_settings(WHOLE + '[analyses.every]\nblocks = "all"\n')
    assert settings.blocks_of("main") == ("transcripts", "lipids_pos")
    assert settings.blocks_of("every") == ("transcripts", "lipids_pos")


def test_settings_are_read_only():
    with pytest.raises(ValueError, match="frozen"):
        parse_settings("").study.title = "other"


@pytest.mark.parametrize("ridge", ["auto", 0, 0.5, [0, 1], [0.5, 0.5], [1, 2, 3]])
def test_ridges_that_are_allowed(ridge):
    text = f"[analyses.a]\nblocks = 'all'\nridge = {ridge!r}"
    found = parse_settings(text).analyses["a"].ridge
    assert found == (tuple(map(float, ridge)) if isinstance(ridge, list) else ridge)


BLOCK = "[blocks.a]\nfile = 'source/a.tsv'\nlayer = 'lipids'\nvalues = 'log'\n"
ANALYSIS = "[analyses.a]\nblocks = 'all'\n"

FAULTS = [
    ("format = 2", "format: is 2: a newer version of this program wrote it; allowed: 1"),
    ("format = 0", "format: 0 is not allowed"),
    ("formt = 1", "formt: unknown key; allowed: analyses, blocks, check, format, samples, study; did you mean"),
    ("[analysis.main]", "did you mean 'analyses'?"),
    ("[study]\ntitle = 3", "study.title: must be a text in quotes, got 3"),
    ("[study]\ntitle = 2026-01-02", "study.title: must be a text in quotes, got datetime.date(2026, 1, 2)"),
    ("study = 3", "study: must be a table of keys, got 3"),
    ("[samples]\nid = ' '", "samples.id: is empty; allowed: some text"),
    ("[samples]\ngroup = ['a', 'b', 'a']", "samples.group: names 'a' twice; allowed: each once"),
    ("[samples]\ngroup = 1", "samples.group: must be a list of texts"),
    ("[samples]\nadjust = 'age'", """samples.adjust: must be a list of texts, like ["a", "b"], got 'age'"""),
    ("[samples]\nadjust = ['age', 3]", "samples.adjust, item 2: must be a text in quotes, got 3"),
    ("[samples]\nkinds = { batch = 'class' }", "kinds.batch: 'class' is not allowed; allowed: 'classes', 'number'"),
    ("[samples]\nexclude = { 'S 7' = '' }", 'samples.exclude."S 7": is empty; allowed: some text'),
    ("[samples]\nexclude = ['S7']", "samples.exclude: must be a table, like { NAME = VALUE }, got ['S7']"),
    ("[samples]\norder = { c = ['a', 'a'] }", "samples.order.c: names 'a' twice"),
    ("[samples]\ntime = 3", "samples.time: must be a text in quotes, got 3"),
    ("[samples]\nlevel = 'visits'", "samples.level: unknown key"),
    (BLOCK + "runs = ''", "blocks.a.runs: is empty; allowed: some text"),
    (BLOCK.replace("log", "mixed") + "runs = 'source/r.tsv'", "blocks.a.runs: is for tables of numbers"),
    (BLOCK + "names = 1", "blocks.a.names: must be a text in quotes, got 1"),
    (BLOCK + "swap = { samples = ['a', 'b'] }", "blocks.a.swap: must be a list, like [{ samples = ["),
    (BLOCK + "swap = [['a', 'b']]", "blocks.a.swap, item 1: must be a table of keys"),
    (BLOCK + "swap = [{ samples = ['a', 'b'] }]", "blocks.a.swap, item 1.reason: is missing; add a line"),
    (BLOCK + "swap = [{ samples = ['a'], reason = 'r' }]", "blocks.a.swap, item 1.samples: names 1 sample; allowed"),
    (BLOCK + "swap = [{ samples = ['a', 'a'], reason = 'r' }]", "blocks.a.swap, item 1.samples: names 'a' twice"),
    (
        BLOCK + "swap = [{ samples = ['a', 'b'], reason = 'r', why = 's' }]",
        "blocks.a.swap, item 1.why: unknown key; allowed: reason, samples",
    ),
    (BLOCK + "decimal = ';'", "blocks.a.decimal: ';' is not allowed; allowed: '.', ','"),
    (BLOCK + "[blocks.a.prepare]\ndrfit = 'none'", "blocks.a.prepare.drfit: unknown key"),
    (BLOCK + "sample_in = 'rows'", "did you mean 'samples_in'?"),
    (BLOCK + "samples_in = 'row'", "'row' is not allowed; allowed: 'rows', 'columns'; did you mean 'rows'?"),
    (BLOCK + "sheet = 'A'", "blocks.a.sheet: is for .xlsx files, and this block's file is 'source/a.tsv'"),
    (BLOCK + "array = 'X'", "blocks.a.array: is for .h5ad files"),
    (BLOCK.replace("log", "ratios"), "allowed: 'counts', 'intensities', 'log', 'proportions', 'beta', 'continuous'"),
    (BLOCK.replace("log", "betas"), "blocks.a.values: 'betas' is not allowed"),
    (BLOCK.replace("lipids", "Lipid"), "blocks.a.layer: 'Lipid' is no layer; did you mean 'lipids'?"),
    (BLOCK.replace("lipids", "../x"), "blocks.a.layer: '../x' is not a name"),
    ("[blocks.a]\nfile = 'x'\nlayer = 'x'", "blocks.a.values: is missing; add a line values = ...; allowed: 'counts'"),
    (BLOCK.replace("[blocks.a]", "[blocks.check]"), "'check' is reserved; allowed: any name but 'check', 'look'"),
    (BLOCK.replace("[blocks.a]", "[blocks.'a b']"), """blocks."a b": 'a b' is not a name; allowed: letters, digits"""),
    (BLOCK + BLOCK.replace("[blocks.a]", "[blocks.A]"), "blocks: 'a' and 'A' differ in case alone; rename one of them"),
    ("[analyses.look]\nblocks = 'all'", "analyses.look: 'look' is reserved"),
    ("[analyses.a]", "analyses.a.blocks: is missing"),
    ("[analyses.a]\nblocks = 'every'", """analyses.a.blocks: must be "all" or a list of blocks, got 'every'"""),
    ("[analyses.a]\nblocks = ['x', 'x']", "analyses.a.blocks: names 'x' twice"),
    (ANALYSIS + "method = 'auto_'", "did you mean 'auto'?"),
    (ANALYSIS + "method = 'pls'", "method: 'pls' is not allowed; allowed: 'auto', 'ridge_cca'"),
    (ANALYSIS + "level = 'visit'", "analyses.a.level: 'visit' is not allowed; allowed: 'visits', 'subjects'"),
    (ANALYSIS + "ridge = -1", "ridge: must not be negative or infinite, got -1; allowed: \"auto\", one number"),
    (ANALYSIS + "ridge = nan", "analyses.a.ridge: must not be negative or infinite, got nan"),
    (ANALYSIS + "ridge = []", "analyses.a.ridge: must be \"auto\" or numbers"),
    (ANALYSIS + "ridge = [1]", "got a list of one"),
    (ANALYSIS + "ridge = true", "analyses.a.ridge: must be \"auto\" or numbers, got True"),
    (ANALYSIS + "components = 0", "analyses.a.components: must be \"auto\" or a whole number, got 0"),
    (ANALYSIS + "components = 1.5", "analyses.a.components: must be \"auto\" or a whole number, got 1.5"),
    (ANALYSIS + "folds = 1", "analyses.a.folds: 1 is out of range; allowed: from 2"),
    (ANALYSIS + "folds = true", "analyses.a.folds: must be a whole number, got true"),
    (ANALYSIS + "permutations = 10.5", "analyses.a.permutations: must be a whole number, got 10.5"),
    (ANALYSIS + "outcome = ''", "analyses.a.outcome: is empty"),
    (ANALYSIS + "outcome_kind = 'text'", "analyses.a.outcome_kind: 'text' is not allowed"),
    (ANALYSIS + "network = { fdr = 1 }", "analyses.a.network.fdr: 1 is out of range; allowed: above 0 and below 1"),
    (ANALYSIS + "network = { fdr = nan }", "analyses.a.network.fdr: nan is out of range"),
    (ANALYSIS + "network = { minimum_r = 1 }", "minimum_r: 1 is out of range; allowed: from 0 and below 1"),
    (ANALYSIS + "network = { correlation = 'Pearson' }", "did you mean 'pearson'?"),
    (ANALYSIS + "network = { stability = -1 }", "analyses.a.network.stability: -1 is out of range; allowed: from 0"),
    (ANALYSIS + "network = { remove_private = 1 }", "analyses.a.network.remove_private: must be"),
    (ANALYSIS + "pathways = { set = 'x' }", "analyses.a.pathways.set: unknown key; allowed: links, sets"),
    ("[check]\naccept = { outlier-S1 = '' }", "check.accept.outlier-S1: is empty; allowed: some text"),
    ("[check]\naccept = ['outlier-S1']", "check.accept: must be a table, like { NAME = VALUE }"),
    ("[check]\naccpt = {}", "check.accpt: unknown key; allowed: accept; did you mean 'accept'?"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "told"), FAULTS, ids=range(len(FAULTS)))
def test_a_fault_is_one_line_with_key_and_way_out(text, told):
    fault = one_fault(text)
    assert fault.startswith("project.toml: ")
    assert told in fault
    assert "\n" not in fault


def test_all_faults_come_in_one_go():
    text = (
        "\n".join(text for text, _ in (FAULTS[2], FAULTS[4]))
        + "\n[samples]\nid = ''\nadjust = 1\nx = 1\n"
        + ANALYSIS
        + "folds = 0\nfold = 1"
    )
    keys = [fault.split(": ")[1] for fault in faults_of(text)]
    expected = [
        "analyses.a.fold",
        "analyses.a.folds",
        "formt",
        "samples.adjust",
        "samples.id",
        "samples.x",
        "study.title",
    ]
    assert sorted(keys) == expected


SYNTAX = [
    ("x = 1\nx = 2\n", "line 2, column 6: this key stands there twice; take one of them out; the line reads: x = 2"),
    ("[a]\nb = 1\n[a]\n", "line 3, column 3: this table stands there twice; join the two; the line reads: [a]"),
    ("title = Drought\n", 'line 1, column 9: this is no value; text needs quotes: "..."; the line reads: title'),
    ('title = "Drought\n', "a text lacks its closing quote"),
    ("title = 'Drought\n", "a text lacks its closing quote"),
    ("a 1\n", "a key needs '=' and a value"),
    ("a = [1 2]\n", "a list lacks its comma or its closing ']'"),
    ("a = {b=1,b=2}\n", "a key stands twice between these braces"),
    ("a = 2026-13-01\n", "something stands after the value; text needs quotes"),
    ('\n\na = """\ntext', "line 4, column 5: a text lacks its closing quote"),
    ("a = " + "[" * 5000, "lists or tables are nested too deep"),
    ("\ufeff\n= 1", "line 2, column 1: this is neither KEY = VALUE nor [TABLE]"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "told"), SYNTAX, ids=range(len(SYNTAX)))
def test_what_is_not_toml_is_told_with_line_and_column(text, told):
    assert told in one_fault(text)


@given(text=st.text(max_size=60) | st.text("[]{}=\"'.#,\n ab1", max_size=40))
def test_any_text_is_read_or_refused_with_a_place(text):
    try:
        assert isinstance(parse_settings(text), Settings)
    except SettingsError as error:
        assert all(fault.startswith("project.toml: ") for fault in error.faults)  # noqa: PT017


def test_files_in_other_encodings_are_told(tmp_path):
    path = tmp_path / "project.toml"
    path.write_bytes(b"\xef\xbb\xbf[study]\r\ntitle = 'x'\r\n")
    assert load_settings(path).study.title == "x"
    assert read_settings_text(path) == "\ufeff[study]\r\ntitle = 'x'\r\n"
    path.write_bytes("[study]\ntitle = 'Sécheresse'\n".encode("cp1252"))
    with pytest.raises(SettingsError, match="line 2, column 11: is not UTF-8; save the file as UTF-8"):
        load_settings(path)
    path.write_bytes("[study]".encode("utf-16"))
    with pytest.raises(SettingsError, match="is UTF-16; save it as UTF-8"):
        load_settings(path)
    path.write_bytes(b"#" * 5_000_000)
    with pytest.raises(SettingsError, match="has 5000000 bytes; allowed: at most"):
        load_settings(path)


def test_a_missing_file_says_how_to_make_one(tmp_path):
    with pytest.raises(
        SettingsError, match="there is no such file; make a project with `workbench init DIR`"
    ):
        load_settings(tmp_path / "project.toml")
    with pytest.raises(SettingsError, match="cannot be read"):
        load_settings(tmp_path)


@pytest.mark.parametrize("name", ["a", "A-1", "_x", "checks", "0", "x" * 64])
def test_names_that_are_allowed(name):
    assert check_name(name, "block") == name


@pytest.mark.parametrize(
    "name", ["", "-a", "a b", "a/b", "..", "ä", "check", "Look", "COMPARE", "x" * 65, "a\n"]
)
def test_names_that_are_refused(name):
    with pytest.raises(Exception, match=r"name of the block: .*allowed:"):
        check_name(name, "block")


def test_the_nearest_spelling_looks_through_case_first():
    assert nearest("FDR", ["fd", "fdr"]) == "fdr"
    assert nearest("annotation", ["adjust", "annotations"]) == "annotations"
    assert hint("xyz", ["adjust"]) == ""


def test_keys_are_shown_as_toml_writes_them():
    assert key_text(("samples", "exclude", 'S "7"')) == 'samples.exclude."S \\"7\\""'
    assert key_text(()) == "(the whole file)"
    assert Path(key_text(("a", "b-1"))).name == "a.b-1"
