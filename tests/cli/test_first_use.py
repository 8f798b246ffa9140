"""What a first user of the program meets: each message is true, says where, and its way out works."""

import subprocess
import sys

import pytest


def edit(folder, old, new):
    path = folder / "project.toml"
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))


def test_wrong_options_of_a_delivery_are_told_at_once_by_their_names(command, made, delivered):
    words = ("--layer", "transcritps", "--values", "count", "--samples-in", "row")
    code, _, err = command("add-block", "new", delivered["transcripts"], *words, "--project", made)
    assert code == 2
    assert "--layer: 'transcritps' is no layer; did you mean 'transcripts'?" in err
    assert "--values: 'count' is not allowed" in err
    assert "--samples-in: 'row' is not allowed; allowed: 'rows', 'columns'; did you mean 'rows'?" in err
    assert not (made / "blocks" / "new.h5ad").exists()


def test_a_layer_of_ones_own_is_taken_when_said_and_told(command, made, delivered):
    words = ("--layer", "transcritps", "--own-layer", "--values", "counts", "--project", made)
    code, out, err = command("add-block", "new", delivered["transcripts"], *words)
    assert code == 0, err
    assert "'transcritps' is one of your own" in out
    assert "own_layer = true" in (made / "project.toml").read_text()
    words = ("--layer", "transcripts", "--values", "counts", "--replace", "--project", made)
    assert command("add-block", "new", delivered["transcripts"], *words)[0] == 0
    assert "own_layer" not in (made / "project.toml").read_text()


def test_wrong_columns_are_told_beside_wrong_keys(command, made):
    edit(made, 'group = "group"', 'group = "grup"\ngrop = "x"')
    edit(made, 'values = "counts"', 'values = "count"')
    code, _, err = command("status", "--project", made)
    assert code == 2
    for piece in ("samples.grop: unknown key", "blocks.rna.values", "no column of samples.tsv 'grup'"):
        assert piece in err


def test_a_wrong_column_of_a_sheet_is_told_first_with_the_nearest(command, made, delivered):
    words = ("--group", "grup", "--adjust", "run_dya", "--replace", "--project", made)
    code, out, err = command("add-samples", delivered["samples"], *words)
    assert (code, out) == (2, "")
    assert "'grup' (did you mean 'group'?), 'run_dya' (did you mean 'run_day'?)" in err


def test_a_sheet_that_does_not_fit_the_settings_can_be_replaced(command, made, delivered):
    sheet = made / "samples.tsv"
    sheet.write_text(sheet.read_text().replace("group", "arm", 1))
    assert command("status", "--project", made)[0] == 2
    code, out, _ = command("add-samples", delivered["samples"], "--replace", "--project", made)
    assert (code, "columns: 1 gained ('group'), 1 lost ('arm')" in out) == (0, True)


def test_empty_cells_of_the_design_are_told_when_they_come_in(command, tmp_path):
    assert command("init", tmp_path / "study")[0] == 0
    rows = ["sample,arm,day", "S1,a,d1", "S2,,d1", "S3,b,d2", "S4,b,"]
    (tmp_path / "sheet.csv").write_text("\n".join(rows) + "\n")
    here = ("--project", tmp_path / "study")
    code, _, err = command("add-samples", tmp_path / "sheet.csv", "--group", "arm", *here)
    assert code == 0
    assert "column 'arm' (group) is empty for 1 sample: 'S2'; such a sample takes no part" in err
    (tmp_path / "t.csv").write_text("id,S1,S2,S3,S4\ng1,1,2,3,4\ng2,5,6,7,8\n")
    words = ("--layer", "lipids", "--values", "continuous", "--adjust", "day")
    code, out, err = command("add-block", "lip", tmp_path / "t.csv", *words, *here)
    assert code == 0, err
    assert "column 'day' (adjust) is empty for 1 sample: 'S4'" in out


def test_without_a_sheet_the_sheet_is_asked_for_first(command, tmp_path):
    assert command("init", tmp_path / "study")[0] == 0
    for words in (["run"], ["check"], ["look"], ["network"]):
        code, _, err = command(*words, "--project", tmp_path / "study")
        assert (code, "no sample sheet yet" in err) == (2, True), words


def test_a_lost_source_is_damage_for_every_command_until_it_is_delivered_again(command, made, delivered):
    (made / "source" / "counts.tsv").unlink()
    for words in (["status"], ["run"], ["prepare", "rna"], ["check", "--files"]):
        code, out, err = command(*words, "--project", made)
        assert code == 3, words
        assert "source/counts.tsv: is missing; restore the delivered file" in out + err
    words = ("--layer", "transcripts", "--values", "counts", "--replace", "--project", made)
    code, out, err = command("add-block", "rna", delivered["transcripts"], *words)
    assert code == 0, err
    assert command("status", "--project", made)[0] == 0


def test_a_result_changed_by_hand_is_told_and_made_again(command, finished):
    table = finished / "results" / "main" / "edges.tsv"
    was = table.read_bytes()
    table.write_bytes(was + b"my note\n")
    out = command("status", "--project", finished)[1]
    assert "network:main: results/main/edges.tsv was changed by hand" in out
    code, _, err = command("run", "--project", finished)
    assert code == 0
    assert "running network main again, since results/main/edges.tsv was changed by hand" in err
    assert table.read_bytes() == was


def test_what_rested_on_a_block_goes_with_it_and_other_things_stay(command, finished):
    note = finished / "results" / "main" / "my_notes.txt"
    note.write_text("mine")
    code, out, _ = command("remove-block", "lcms", "--project", finished)
    assert code == 0
    assert "results that rested on it are out as well: results/check, results/look, results/main" in out
    left = {str(path.relative_to(finished / "results")) for path in (finished / "results").rglob("*.*")}
    assert "main/my_notes.txt" in left
    assert not any(name.startswith(("look/lcms", "main/edges", "check")) for name in left)
    assert "look/rna/captions.tsv" in left
    assert command("check", "--files", "--project", finished)[0] == 0
    assert "read:lcms" not in command("status", "--project", finished)[1]


def test_a_fresh_project_is_read_where_it_cannot_be_written(command, finished, monkeypatch):
    from workbench.errors import StorageError
    from workbench.workflow import stages

    def shut(root, _):
        raise StorageError(f"{root}: no permission")

    monkeypatch.setattr(stages, "project_lock", shut)
    for words in (["check"], ["export", "rna"], ["look", "rna"], ["prepare", "rna", "--explain"], ["run"]):
        assert command(*words, "--project", finished)[0] == 0, words
    (finished / "results" / "main" / "edges.tsv").unlink()
    assert command("run", "--project", finished)[0] == 3


def test_the_next_command_is_about_the_analysis_that_was_run(command, finished):
    with (finished / "project.toml").open("a") as file:
        file.write('[analyses.rp]\nblocks = "all"\npermutations = 50\nrepeats = 1\n')
    code, _, err = command("run", "rp", "--project", finished)
    assert code == 0
    assert "next: open results/rp/followup.tsv" in err
    assert "next: open results/main/followup.tsv" in command("run", "main", "--project", finished)[2]


def test_a_reader_that_has_seen_enough_ends_nothing(finished):
    """The command's own exit code holds, whatever happens to the pipe; nothing is said of it."""
    words = [sys.executable, "-m", "workbench", "export", "rna", "--project", str(finished)]
    with subprocess.Popen(words, stdout=subprocess.PIPE, stderr=subprocess.PIPE) as process:
        process.stdout.close()
        assert process.wait(60) == 0
        assert process.stderr.read() == b""


SWAPPED_KIND = 'layer = "metabolites"\nvalues = "intensities"'


def test_a_block_that_cannot_be_prepared_is_a_finding_and_the_others_are_checked(command, made):
    edit(made, SWAPPED_KIND, SWAPPED_KIND.replace("intensities", "log"))
    code, out, err = command("check", "--project", made)
    assert code == 1, err
    assert "error not_prepared-lcms (lcms): block 'lcms' cannot be prepared: " in out
    assert 'set values = "intensities" in [blocks.lcms] of project.toml (or "counts")' in out
    assert "1 error, " in out
    assert "degrees_of_freedom" in out
    assert "next: settle not_prepared-lcms as `workbench check` says, then workbench run" in err
    out = command("status", "--project", made)[1]
    assert "prepare:lcms: cannot be done as things stand; `workbench check` says why" in out
    assert "check:data: up to date" in out
    assert "open error: not_prepared-lcms" in out
    edit(made, "[study]", '[check]\naccept = { not_prepared-lcms = "never mind" }\n[study]')
    code, _, err = command("run", "--project", made)
    assert code == 1
    assert "with such data no analysis can be made" in err
    assert not (made / "results" / "main").exists()
    assert command("prepare", "lcms", "--project", made)[0] == 2
    edit(made, SWAPPED_KIND.replace("intensities", "log"), SWAPPED_KIND)
    assert command("check", "--project", made)[0] == 0


def test_a_block_that_cannot_be_read_any_more_is_a_finding_as_well(command, made):
    sheet = made / "samples.tsv"
    lines = sheet.read_text().splitlines()
    sheet.write_text("\n".join([lines[0], *("renamed" + line for line in lines[1:])]) + "\n")
    code, out, _ = command("check", "--project", made)
    assert code == 1
    assert "error not_read-rna (rna): block 'rna' cannot be read: " in out
    assert "error not_read-lcms (lcms)" in out


def test_a_block_with_which_an_analysis_does_not_hold_any_more_is_refused(command, made, delivered):
    edit(made, 'blocks = "all"', 'blocks = "all"\nmethod = "ridge_cca"')
    before = (made / "project.toml").read_text()
    words = ("--layer", "proteins", "--values", "intensities", "--project", made)
    code, _, err = command("add-block", "prot", delivered["metabolites"], *words)
    assert code == 2
    assert "with block 'prot' other settings do not hold any more" in err
    assert "analyses.main.method: 'ridge_cca' has two sides" in err
    assert (made / "project.toml").read_text() == before


def test_values_that_look_like_another_kind_are_told_when_they_come_in(command, made, delivered):
    words = ("--layer", "lipids", "--values", "log", "--project", made)
    code, out, err = command("add-block", "lip", delivered["metabolites"], *words)
    assert code == 0, err
    assert "caution: block 'lip' (source/metabolites.csv): values from " in out
    assert 'do not look like logarithms; set values = "intensities" in [blocks.lip] of project.toml' in out
    edit(made, 'layer = "lipids"\nvalues = "log"', 'layer = "lipids"\nvalues = "intensities"')
    assert command("prepare", "lip", "--project", made)[0] == 0


def test_the_same_sheet_with_other_parts_tells_which_change(command, made, delivered):
    words = ("--group", "run_day", "--adjust", "group", "--replace", "--project", made)
    code, out, err = command("add-samples", delivered["samples"], *words)
    assert code == 0, err
    assert "nothing changes in the sample sheet: it is the same" in out
    assert "group: 'run_day' now, 'group' before" in out


def test_identifiers_are_recognised_and_told_when_a_table_comes_in(command, made, tmp_path):
    samples = [line.split("\t")[0] for line in (made / "samples.tsv").read_text().splitlines()[1:]]
    lines = [",".join(["gene", *samples])]
    lines += [
        ",".join([f"ENSG{k:011d}.{k % 5 + 1}", *(str(k + j) for j in range(len(samples)))]) for k in range(9)
    ]
    (tmp_path / "genes.csv").write_text("\n".join(lines) + "\n")
    words = ("--layer", "transcripts", "--values", "counts", "--project", made)
    code, out, err = command("add-block", "genes", tmp_path / "genes.csv", *words)
    assert code == 0, err
    assert "identifiers: the feature ids: Ensembl identifiers, 0 of 9 cells as they should be" in out
    assert "9 cells with a version suffix" in out


@pytest.mark.parametrize(
    ("template", "options"),
    [
        ("two-layers", "--group COLUMN --adjust COLUMN"),
        ("paired", "--subject COLUMN --time COLUMN"),
        ("time-course", "--subject COLUMN --time COLUMN"),
    ],
)
def test_the_first_command_asks_for_what_the_template_needs(command, tmp_path, template, options):
    code, _, err = command("init", tmp_path / "study", "--template", template)
    assert (code, err.rstrip().endswith(f"workbench add-samples FILE {options}")) == (0, True)


def test_an_accepted_finding_is_told_as_accepted_while_it_runs(made, capsys):
    from workbench import Project
    from workbench.cli.console import terminal_reporter

    project = Project.open(made)
    first = project.check()[0]
    settings = made / "project.toml"
    settings.write_text(settings.read_text() + f'\n[check]\naccept = {{ "{first["id"]}" = "as planned" }}\n')
    (made / "results" / "check" / "findings.tsv").unlink()
    project.check(reporter=terminal_reporter(False))
    assert (
        f"  accepted {first['severity']} {first['id']} (as planned): {first['what']}"
        in capsys.readouterr().err
    )


def test_the_levels_of_the_group_are_told_with_the_reference_first(command, tmp_path, delivered):
    assert command("init", tmp_path / "study")[0] == 0
    code, _, err = command(
        "add-samples", delivered["samples"], "--group", "group", "--project", tmp_path / "study"
    )
    assert code == 0
    (line,) = [line for line in err.splitlines() if line.startswith("group 'group'")]
    assert "(12), " in line
    assert "differences are from the first; another order is said with order = { group = [...] }" in line


def test_the_order_of_visits_is_told_when_the_sheet_comes_in(command, tmp_path):
    sheet, study = tmp_path / "tubes.tsv", tmp_path / "study"
    lines = [f"T{d}{v[0]}\tD{d}\t{v}" for d in range(4) for v in ("before", "after")]
    sheet.write_text("\n".join(["tube\tdonor\tvisit", *lines]) + "\n")
    assert command("init", study, "--template", "paired")[0] == 0
    code, _, err = command("add-samples", sheet, "--project", study)
    assert (code, "add-samples FILE --subject COLUMN" in err) == (2, True)
    code, _, err = command("add-samples", sheet, "--subject", "donor", "--time", "visit", "--project", study)
    assert (code, "visits in the order after, before; another one is said with order" in err) == (0, True)
