"""Whatever a user gets wrong: one clear message, the agreed exit code, every file as it was."""

import os
import threading
import time

import pytest


def snapshot(folder):
    """Return every file of a project with its bytes, the lock aside."""
    return {
        str(path.relative_to(folder)): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file() and path.name not in ("lock", "holder.json")
    }


def edit(folder, old, new):
    path = folder / "project.toml"
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))


WRONG_SETTINGS = [
    ('blocks = "all"', 'blocks = ["rna", "lcsm"]', ["analyses.main.blocks", "lcsm", "did you mean 'lcms'"]),
    ("adjust", "ajust", ["samples.ajust", "did you mean 'adjust'"]),
    ('group = "group"', 'group = ["grp"]', ["samples.group", "grp", "group"]),
    ('values = "counts"', 'values = "count"', ["blocks.rna.values", "count", "counts"]),
    ('blocks = "all"', 'blocks = "all"\nstability = 100', ["analyses.main.stability"]),
    ("format = 1", "format = 99", ["format", "99"]),
    ("[study]", "[study", ["project.toml", "line"]),
]


@pytest.mark.parametrize(("old", "new", "pieces"), WRONG_SETTINGS, ids=[new for _, new, _ in WRONG_SETTINGS])
def test_wrong_settings_stop_with_2_before_anything_runs(command, made, old, new, pieces):
    edit(made, old, new)
    before = snapshot(made)
    code, out, err = command("run", "--project", made)
    assert (code, out) == (2, "")
    for piece in ["project.toml", *pieces]:
        assert piece in err
    assert snapshot(made) == before


def test_all_faults_come_in_one_go(command, made):
    edit(made, "adjust", "ajust")
    edit(made, 'values = "counts"', 'values = "count"')
    err = command("run", "--project", made)[2]
    assert "samples.ajust" in err
    assert "blocks.rna.values" in err


WRONG_CALLS = [
    (["run", "mian"], ["no analysis 'mian'", "'main'"]),
    (["prepare", "rnaa"], ["no block 'rnaa'", "'rna'"]),
    (["remove-block", "nothing"], ["no block 'nothing'"]),
    (["add-block", "rna", "{counts}", "--layer", "proteins", "--values", "log"], ["'rna' is already there"]),
    (["add-block", "../x", "{counts}", "--layer", "proteins", "--values", "log"], ["../x", "letters"]),
    (
        ["add-block", "new", "nowhere.tsv", "--layer", "proteins", "--values", "log"],
        ["nowhere.tsv", "no such file"],
    ),
    (["add-block", "new", "{counts}", "--layer", "proteins", "--values", "logs"], ["values", "log"]),
    (
        ["add-block", "new", "{counts}", "--layer", "proteins", "--values", "log", "--adjust", "plate"],
        ["'plate'", "run_day"],
    ),
    (["add-block", "new", "{foreign}", "--layer", "proteins", "--values", "log"], ["no sample"]),
    (["add-samples", "{samples}"], ["the project has a sample sheet"]),
    (["add-block", "new", "{counts}"], ["--layer"]),
    (["frobnicate"], ["frobnicate"]),
]


@pytest.mark.parametrize(("words", "pieces"), WRONG_CALLS, ids=[" ".join(words) for words, _ in WRONG_CALLS])
def test_wrong_calls_stop_with_2_and_change_nothing(command, made, delivered, tmp_path, words, pieces):
    foreign = tmp_path / "foreign.tsv"
    foreign.write_text("feature\tX1\tX2\tX3\ng1\t1\t2\t3\ng2\t3\t4\t5\n")
    places = {"{counts}": delivered["transcripts"], "{foreign}": foreign, "{samples}": delivered["samples"]}
    before = snapshot(made)
    code, _, err = command(*[places.get(word, word) for word in words], "--project", made)
    assert code == 2, err
    for piece in pieces:
        assert piece in err
    assert "Traceback" not in err
    assert snapshot(made) == before


def test_a_folder_that_is_no_project_is_refused_with_the_way_out(command, tmp_path):
    code, _, err = command("run", "--project", tmp_path)
    assert code == 2
    assert "workbench init" in err


def test_init_refuses_a_folder_that_is_not_empty(command, tmp_path):
    (tmp_path / "thesis.doc").write_text("precious")
    code, _, err = command("init", tmp_path)
    assert (code, "not empty" in err) == (2, True)
    assert [path.name for path in tmp_path.iterdir()] == ["thesis.doc"]


def test_an_unknown_template_is_named_with_the_nearest(command, tmp_path):
    code, _, err = command("init", tmp_path / "new", "--template", "two-layer")
    assert (code, "did you mean 'two-layers'" in err) == (2, True)
    assert not (tmp_path / "new").exists()


def test_several_samples_of_a_subject_stop_rather_than_being_pooled(command, made):
    edit(made, "[samples]\nid", '[samples]\nsubject = "group"\nid')
    edit(made, 'group = "group"', "")
    code, _, err = command("run", "--project", made)
    assert (code, 'level = "visits"' in err) == (2, True)


def test_group_and_nuisance_that_say_the_same_are_named(command, made):
    sheet = (made / "samples.tsv").read_text().splitlines()
    place = sheet[0].split("\t").index("group")
    lines = [line + "\t" + ("day" if at == 0 else line.split("\t")[place]) for at, line in enumerate(sheet)]
    (made / "samples.tsv").write_text("\n".join(lines) + "\n")
    edit(made, 'adjust = ["run_day"]', 'adjust = ["day"]')
    assert command("run", "--project", made)[0] == 1
    code, _, err = command("network", "--project", made)
    assert code == 2
    assert "group" in err
    assert "day" in err
    assert not (made / "results" / "main" / "edges.tsv").exists()


def test_a_project_in_use_is_left_alone_with_3(command, made):
    from workbench.store import project_lock

    held, free = threading.Event(), threading.Event()

    def hold():
        with project_lock(made, "run"):
            held.set()
            free.wait(30)

    holder = threading.Thread(target=hold)
    holder.start()
    try:
        assert held.wait(10)
        code, _, err = command("prepare", "--project", made)
        assert code == 3
        assert str(os.getpid()) in err
        assert command("status", "--project", made)[0] == 0
    finally:
        free.set()
        holder.join()


def test_a_sheet_edited_in_place_is_noticed_and_not_taken_for_damage(command, finished):
    time.sleep(0.01)
    sheet = finished / "samples.tsv"
    lines = sheet.read_text().splitlines()
    sheet.write_text("\n".join([lines[0] + "\tnote", *[line + "\tfine" for line in lines[1:]]]) + "\n")
    assert command("check", "--files", "--project", finished)[0] == 0
    out = command("run", "--dry-run", "--project", finished)[1]
    assert "read:rna: changed: sample sheet" in out
    code, _, err = command("run", "--project", finished)
    assert code == 0
    done = next(line for line in err.splitlines() if line.startswith("done: "))
    assert "prepare:lcms" in done
    assert "network" not in done


def test_an_init_that_was_killed_can_be_done_again(command, tmp_path):
    (tmp_path / "study" / ".workbench").mkdir(parents=True)
    assert command("init", tmp_path / "study")[0] == 0


def test_two_blocks_of_one_layer_are_prepared_and_looked_at_and_told_apart(command, made):
    assert command("remove-block", "rna", "--project", made)[0] == 0
    text = (made / "project.toml").read_text()
    start = text.index("[blocks.lcms]")
    block = text[start : text.index("[analyses.main]")]
    (made / "project.toml").write_text(
        text[:start] + block + block.replace("lcms", "lcms2") + text[start + len(block) :]
    )
    assert command("run", "--project", made)[0] == 0
    code, _, err = command("network", "--project", made)
    assert code == 2
    assert "one layer (metabolites)" in err


def test_a_block_that_an_analysis_cannot_spare_is_not_taken_out(command, made):
    text = (made / "project.toml").read_text().replace('blocks = "all"', 'blocks = ["rna", "lcms"]')
    (made / "project.toml").write_text(text)
    before = snapshot(made)
    code, out, err = command("remove-block", "lcms", "--project", made)
    assert (code, out) == (2, "")
    assert "analyses.main" in err
    assert snapshot(made) == before
