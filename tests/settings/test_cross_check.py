"""The settings are checked against the sample sheet, the files and each other; every fault in one go."""

import pandas as pd
import pytest

from workbench.settings.cross_check import cross_check, file_fault, level_text
from workbench.settings.load import parse_settings

SHEET = pd.DataFrame(
    {
        "condition": ["dry", "wet", "dry", "wet"],
        "age": [1.0, 2.0, 3.0, 4.0],
        "batch": [1, 1, 2, 2],
        "donor": ["a", "b", "c", "d"],
    },
    index=pd.Index(["S1", "S2", "S3", "S4"], name="sample"),
)

SAMPLES = """
[samples]
id = "sample"
group = "condition"
subject = "donor"
adjust = ["age"]
"""

BLOCKS = """
[blocks.rna]
file = "source/rna.tsv"
layer = "transcripts"
values = "counts"
[blocks.pos]
file = "source/pos.tsv"
layer = "metabolites"
values = "log"
[blocks.neg]
file = "source/pos.tsv"
layer = "metabolites"
values = "log"
"""


@pytest.fixture
def root(tmp_path):
    """Return a project's directory with its files."""
    (tmp_path / "source").mkdir()
    for name in ("rna.tsv", "pos.tsv", "genes.tsv"):
        (tmp_path / "source" / name).touch()
    return tmp_path


def faults_of(text, root, sheet=SHEET):
    return cross_check(parse_settings(text), sheet, root)


def test_settings_that_fit_have_no_fault(root):
    text = SAMPLES + 'kinds = { age = "number", batch = "classes" }\norder = { condition = ["wet", "dry"] }\n'
    text += (
        'exclude = { S2 = "lost" }\n'
        + BLOCKS
        + 'adjust = ["batch"]\nexclude = { S1 = "x" }\nannotations = "source/genes.tsv"\n'
    )
    text += '[analyses.main]\nblocks = "all"\n[analyses.two]\nblocks = ["rna", "neg"]\n'
    assert faults_of(text, root) == []


COLUMNS = "; allowed: 'condition', 'age', 'batch', 'donor';"
NAMES = "; allowed: 'S1', 'S2', 'S3', 'S4';"

ONE = [
    (
        SAMPLES.replace('"condition"', '"Condition"'),
        f"samples.group: there is no column of samples.tsv 'Condition'{COLUMNS} did you mean 'condition'?",
    ),
    (SAMPLES.replace('"condition"', '"sample"'), "samples.group: 'sample' is the column of the sample's name"),
    (
        SAMPLES.replace('"donor"', '"doner"'),
        f"samples.subject: there is no column of samples.tsv 'doner'{COLUMNS} did you mean 'donor'?",
    ),
    (SAMPLES.replace('["age"]', '["ages"]'), "samples.adjust: there is no column of samples.tsv 'ages'"),
    (
        SAMPLES.replace('["age"]', '["condition"]'),
        "samples.adjust: 'condition' is the group as well; take it out of one of them",
    ),
    (SAMPLES.replace('["age"]', '["donor"]'), "samples.adjust: 'donor' is the subject as well"),
    (SAMPLES.replace('"donor"', '"condition"'), "samples.subject: 'condition' is the group as well"),
    (
        SAMPLES.replace('"sample"', '"tube"'),
        "samples.id: there is no column of samples.tsv 'tube'; allowed: 'sample', 'condition'",
    ),
    (SAMPLES + "kinds = { agee = 'number' }", "samples.kinds.agee: there is no column of samples.tsv 'agee'"),
    (SAMPLES + "kinds = { batch = 'number' }", "samples.kinds.batch: no adjust names this column; allowed: 'age'"),
    (SAMPLES + "order = { batch = ['1', '2'] }", "samples.order.batch: is not the group or the time; allowed:"),
    (
        SAMPLES + "order = { condition = ['wet'] }",
        "samples.order.condition: lacks 'dry'; name every level of 'condition' once",
    ),
    (
        SAMPLES + "order = { condition = ['wet', 'dry', 'damp'] }",
        "samples.order.condition: there is no level 'damp'; allowed: 'dry', 'wet'",
    ),
    (
        SAMPLES + "exclude = { S5 = 'x' }",
        "samples.exclude.S5: there is no sample of samples.tsv 'S5'; allowed: 'S1', 'S2', 'S3', 'S4'",
    ),
    (SAMPLES + "exclude = { S1 = 'x', S2 = 'x', S3 = 'x', S4 = 'x' }", "samples.exclude: leaves out every sample"),
    (
        BLOCKS + "adjust = ['bath']",
        f"blocks.neg.adjust: there is no column of samples.tsv 'bath'{COLUMNS} did you mean 'batch'?",
    ),
    (
        BLOCKS + "exclude = { s1 = 'x' }",
        f"blocks.neg.exclude.s1: there is no sample of samples.tsv 's1'{NAMES} did you mean 'S1'?",
    ),
    (
        BLOCKS + "annotations = 'source/gene.tsv'",
        "blocks.neg.annotations: 'source/gene.tsv' is not there; put the file back, or name another; did you mean",
    ),
    (BLOCKS + "annotations = '../genes.tsv'", "blocks.neg.annotations: '../genes.tsv' leads out of the project"),
    (
        BLOCKS + "names = 'source/neg_names.tsv'",
        "blocks.neg.names: 'source/neg_names.tsv' is not there; put the file back, or name another",
    ),
    (BLOCKS + "runs = '/tmp/runs.tsv'", "blocks.neg.runs: '/tmp/runs.tsv' leads out of the project"),
    (
        BLOCKS + "swap = [{ samples = ['S1', 's2'], reason = 'x' }]",
        f"blocks.neg.swap, item 1.samples: there is no sample of samples.tsv 's2'{NAMES} did you mean 'S2'?",
    ),
    (
        BLOCKS + "swap = [{ samples = ['S1', 'S2'], reason = 'x' }, { samples = ['S3', 'S1'], reason = 'y' }]",
        "blocks.neg.swap, item 2.samples: 'S1' is in item 1 too; name each sample once: join the two chains",
    ),
    (
        BLOCKS + "[analyses.a]\nblocks = ['rna', 'post']",
        "analyses.a.blocks: there is no block 'post'; allowed: 'rna', 'pos', 'neg'; did you mean 'pos'?",
    ),
    (
        BLOCKS + "[analyses.a]\nblocks = ['rna']",
        "analyses.a.blocks: names 1 block; allowed: two or more, of two layers",
    ),
    (
        BLOCKS + "[analyses.a]\nblocks = ['pos', 'neg']",
        "analyses.a.blocks: all these blocks are of the layer 'metabolites'",
    ),
]  # fmt: skip


@pytest.mark.parametrize(("text", "told"), ONE, ids=range(len(ONE)))
def test_a_fault_is_one_line_with_key_and_way_out(root, text, told):
    [fault] = faults_of(text, root)
    assert fault.startswith(f"project.toml: {told}")


def test_a_blocks_nuisance_is_not_the_group_either(root):
    text = '[samples]\ngroup = ["condition"]\n' + BLOCKS + "adjust = ['condition']"
    [fault] = faults_of(text, root)
    assert fault.startswith("project.toml: blocks.neg.adjust: 'condition' is the group as well")


def run_faults(root, adjust, run_columns, kinds="{}"):
    text = f"[samples]\nkinds = {kinds}\n" + BLOCKS + f"runs = 'source/genes.tsv'\nadjust = ['{adjust}']"
    return cross_check(parse_settings(text), SHEET, root, run_columns)


def test_a_blocks_nuisance_may_be_a_column_of_its_run_sheet(root):
    own = {"neg": ["order", "batch", "column_age"]}
    assert run_faults(root, "column_age", own, '{ column_age = "number" }') == []
    [fault] = run_faults(root, "columnage", own)
    assert fault.startswith(
        "project.toml: blocks.neg.adjust: there is no column of samples.tsv or the run sheet 'columnage'; allowed: "
        "'condition', 'age', 'batch', 'donor', 'order', 'column_age'; did you mean 'column_age'?"
    )
    other = run_faults(root, "age", {"pos": ["lane"]}, '{ lane = "classes" }')
    assert other == ["project.toml: samples.kinds.lane: no adjust names this column; allowed: 'age'"]


def test_columns_of_a_run_sheet_that_was_not_read_are_no_faults(root):
    assert run_faults(root, "lane", None, '{ lane = "classes" }') == []
    assert len(run_faults(root, "lane", None, '{ plate = "classes" }')) == 1


def test_all_faults_come_in_one_go(root):
    (root / "source/pos.tsv").unlink()
    text = (
        '[samples]\ngroup = "x"\nadjust = ["y"]\nexclude = { S9 = "z" }\n'
        + BLOCKS
        + "[analyses.a]\nblocks = ['rna', 'nag']"
    )
    keys = [fault.split(": ")[1] for fault in faults_of(text, root)]
    expected = ["samples.group", "samples.adjust", "samples.exclude.S9", "blocks.pos.file", "blocks.neg.file"]
    assert keys == [*expected, "analyses.a.blocks"]


def test_levels_of_excluded_samples_may_be_left_out_of_the_order(root):
    sheet = SHEET.assign(condition=["dry", "wet", "dry", "blank"])
    order = "order = { condition = ['wet', 'dry'] }\n"
    assert faults_of(SAMPLES + order + "exclude = { S4 = 'blank' }", root, sheet) == []
    assert "lacks 'blank'" in faults_of(SAMPLES + order, root, sheet)[0]
    everything = "order = { condition = ['wet', 'dry', 'blank'] }\nexclude = { S4 = 'blank' }"
    assert faults_of(SAMPLES + everything, root, sheet) == []


def test_numbers_are_levels_as_they_are_written(root):
    sheet = SHEET.assign(day=[1.0, 2.0, 10.0, float("nan")])
    assert faults_of("[samples]\ngroup = 'day'\norder = { day = ['1', '2', '10'] }", root, sheet) == []
    assert (
        "there is no level '10.0'"
        in faults_of("[samples]\ngroup = 'day'\norder = { day = ['1', '2', '10.0'] }", root, sheet)[0]
    )
    missing = [None, float("nan"), "", pd.NA, pd.NaT, "NA", " n/a".upper()]
    assert [level_text(cell) for cell in missing] == [None] * len(missing)
    assert [level_text(cell) for cell in (0.5, 3, True, " wet ", "-")] == ["0.5", "3", "True", "wet", "-"]


def test_a_sheet_whose_names_are_a_column_is_checked_too(root):
    text = SAMPLES + "exclude = { S5 = 'x' }"
    [fault] = faults_of(text, root, SHEET.reset_index())
    assert fault.startswith("project.toml: samples.exclude.S5: there is no sample")


def test_a_long_list_of_allowed_names_is_cut(root):
    sheet = pd.DataFrame({"a": range(200)}, index=pd.Index([f"S{i}" for i in range(200)], name="sample"))
    [fault] = faults_of("[samples]\nexclude = { T7 = 'x' }", root, sheet)
    assert "'S11' and 188 more" in fault


def test_an_analysis_of_all_blocks_waits_for_them(root):
    one = BLOCKS[: BLOCKS.index("[blocks.pos]")]
    assert faults_of(one + '[analyses.main]\nblocks = "all"', root) == []
    assert faults_of('[analyses.main]\nblocks = "all"', root) == []


@pytest.mark.parametrize("file", ["/etc/passwd", "../x", "source/../../x", "a\\b", "C:/x", "x\0"])
def test_a_file_outside_the_project_is_refused(root, file):
    assert "leads out of the project" in file_fault(root, file)


def test_links_and_folders_are_no_files_of_the_project(root, tmp_path_factory):
    outside = tmp_path_factory.mktemp("outside")
    (outside / "x.tsv").touch()
    (root / "source/link.tsv").symlink_to(outside / "x.tsv")
    (root / "source/inner.tsv").symlink_to(root / "source/rna.tsv")
    (root / "linked").symlink_to(outside)
    assert "is a link that leads out of the project" in file_fault(root, "source/link.tsv")
    assert "is a link that leads out of the project" in file_fault(root, "linked/x.tsv")
    assert file_fault(root, "source/inner.tsv") is None
    assert file_fault(root, "source/rna.tsv") is None
    assert "is not a file" in file_fault(root, "source")
    assert "is not there" in file_fault(root, "nowhere/x.tsv")


ANALYSIS = '[analyses.main]\nblocks = "all"\n'
METHOD_FAULTS = [
    ('method = "multiblock_pls"', "analyses.main.outcome: is not given"),
    ('outcome = "condition"', 'analyses.main.outcome: is for method = "multiblock_pls"'),
    ('outcome_kind = "classes"', "analyses.main.outcome_kind: is for an outcome"),
    ('method = "multiblock_pls"\noutcome = "conditon"', "block 'conditon'"),
    ('method = "multiblock_pls"\noutcome = "sample"', "'sample'"),
    ('method = "multiblock_pls"\noutcome = "donor"', "'donor' names samples or subjects"),
    ("ridge = [1, 2, 3]", "analyses.main.ridge: has 3 numbers; allowed: one, or one per layer (2)"),
    (
        'pathways = { sets = "source/none.gmt" }',
        "analyses.main.pathways.sets: 'source/none.gmt' is not there",
    ),
    ('pathways = { links = "../links.tsv" }', "analyses.main.pathways.links: '../links.tsv' leads out"),
]


@pytest.mark.parametrize(("lines", "told"), METHOD_FAULTS, ids=range(len(METHOD_FAULTS)))
def test_an_analysis_is_held_against_its_method_and_files(root, lines, told):
    [fault] = faults_of(SAMPLES + BLOCKS + ANALYSIS + lines, root)
    assert told in fault


def test_ridge_cca_has_two_sides(root):
    blocks = "".join(
        f'[blocks.b{k}]\nfile = "source/rna.tsv"\nlayer = "{layer}"\nvalues = "log"\n'
        for k, layer in enumerate(("transcripts", "lipids", "proteins"))
    )
    text = f'{blocks}[analyses.main]\nmethod = "ridge_cca"\nblocks = '
    assert faults_of(text + '["b0", "b2"]\n', root) == []
    (told,) = faults_of(text + '"all"\n', root)
    assert told.startswith(
        "project.toml: analyses.main.method: 'ridge_cca' has two sides, and the blocks of this"
    )
    assert "3 layers ('lipids', 'proteins', 'transcripts'); write method = \"auto\", or list" in told


def test_level_and_time_need_a_subject(root):
    text = SAMPLES.replace('subject = "donor"', 'time = "age"').replace('adjust = ["age"]', "")
    faults = faults_of(text + BLOCKS + ANALYSIS + 'level = "visits"', root)
    assert [fault.split(": ")[1] for fault in faults] == ["samples.time", "analyses.main.level"]


def test_an_outcome_that_names_a_block_and_a_column_is_refused(root):
    text = (
        SAMPLES
        + BLOCKS.replace("blocks.neg", "blocks.batch")
        + ANALYSIS
        + 'method = "multiblock_pls"\noutcome = "batch"'
    )
    [fault] = faults_of(text, root)
    assert "is a column of samples.tsv and a block" in fault


def test_an_outcome_that_is_adjusted_for_is_told_at_once(root):
    lines = ANALYSIS + 'method = "multiblock_pls"\noutcome = "age"\noutcome_kind = "number"'
    [fault] = faults_of(SAMPLES + BLOCKS + lines, root)
    assert "'age' is nuisance as well (adjust of [samples]) and would be removed" in fault
