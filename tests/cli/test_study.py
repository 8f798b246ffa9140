"""A whole study by its commands, and what each of them prints."""

import json
import subprocess
import sys
import time

import pytest

from workbench import __version__


def test_five_commands_make_a_study(command, delivered, tmp_path):
    """init, add-samples, add-block, add-block, run: the whole road."""
    folder = tmp_path / "study"
    assert command("init", folder, "--title", "Five commands")[0] == 0
    here = ("--project", folder)
    code, out, err = command(
        "add-samples", delivered["samples"], "--group", "group", "--adjust", "run_day", *here
    )
    assert (code, "24 samples" in out) == (0, True), err
    code, out, err = command(
        "add-block", "rna", delivered["transcripts"], "--layer", "transcripts", "--values", "counts", *here
    )
    assert (code, "next: workbench add-block" in err) == (0, True), err
    code, out, err = command(
        "add-block",
        "lcms",
        delivered["metabolites"],
        "--layer",
        "metabolites",
        "--values",
        "intensities",
        *here,
    )
    assert (code, "next: workbench run" in err) == (0, True), err
    code, out, err = command("run", *here)
    assert code == 0, err
    assert "edges.tsv" in out
    assert "next: open results/main/followup.tsv" in err
    assert (folder / "results" / "main" / "network.graphml").stat().st_size > 1000


def test_a_second_run_does_nothing_and_says_so(command, finished):
    before = {path: path.stat().st_mtime_ns for path in finished.rglob("*") if path.is_file()}
    code, out, _ = command("run", "--project", finished)
    assert code == 0
    assert "nothing to do: 11 stages are up to date" in out
    after = {path: path.stat().st_mtime_ns for path in finished.rglob("*") if path.is_file()}
    changed = {path.name for path in before.keys() | after.keys() if before.get(path) != after.get(path)}
    assert changed <= {"lock", "holder.json"}


def test_dry_run_names_every_stage_and_writes_nothing(command, made):
    code, out, _ = command("run", "--dry-run", "--project", made)
    assert code == 0
    assert [line.split(": ")[0] for line in out.splitlines()] == [
        *("read:rna", "read:lcms", "prepare:rna", "prepare:lcms"),
        *("check:data", "look:rna", "look:lcms", "look:between-blocks"),
        *("integrate:main", "network:main", "pathways:main"),
    ]
    assert "read:rna: up to date" in out
    assert not (made / "results").exists()


def test_status_says_where_the_project_stands(command, made):
    code, out, err = command("status", "--project", made)
    assert code == 0
    assert "A small study: 24 samples, group: group, blocks: rna, lcms" in out
    assert "integrate:main: waits for prepare:rna, prepare:lcms" in out
    assert "next: workbench run" in err


def test_status_as_json_is_json(command, finished):
    code, out, _ = command("status", "--json", "--project", finished)
    found = json.loads(out)
    assert code == 0
    assert found["schema_version"] == 1
    assert all(stage["fresh"] for stage in found["stages"])
    assert len(found["stages"]) == 11


def test_check_files_finds_a_changed_byte_and_exits_with_3(command, finished):
    assert command("check", "--files", "--project", finished)[0] == 0
    path = finished / "results" / "main" / "edges.tsv"
    path.write_bytes(path.read_bytes()[:-2] + b"9\n")
    code, out, _ = command("check", "--files", "--project", finished)
    assert code == 3
    assert "results/main/edges.tsv" in out


def test_a_damaged_block_stops_the_run_with_3(command, made):
    path = made / "blocks" / "rna.h5ad"
    data = bytearray(path.read_bytes())
    data[len(data) // 2] ^= 255
    path.write_bytes(data)
    code, _, err = command("run", "--project", made)
    assert code == 3
    assert "blocks/rna.h5ad" in err


def test_remove_block_takes_the_block_out_and_keeps_the_source(command, finished):
    assert command("remove-block", "lcms", "--project", finished)[0] == 0
    assert not (finished / "blocks" / "lcms.h5ad").exists()
    assert (finished / "source" / "metabolites.csv").exists()
    code, out, err = command("status", "--project", finished)
    assert (code, "blocks: rna" in out, "next: workbench add-block" in err) == (0, True, True)


@pytest.mark.parametrize("flag", ["--help", "--version"])
def test_help_and_version_load_no_scientific_library(flag):
    script = (
        "import sys; sys.argv = ['workbench', sys.argv[1]]\n"
        "from workbench.cli.main import run\n"
        "try: run()\nexcept SystemExit: pass\n"
        "heavy = {'numpy', 'pandas', 'scipy', 'sklearn', 'anndata', 'h5py', 'networkx', 'matplotlib', 'rich'}\n"
        "print('LOADED', sorted(heavy & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", script, flag], capture_output=True, text=True, check=True)
    assert "LOADED []" in done.stdout
    assert ("From delivered" in done.stdout) if flag == "--help" else (__version__ in done.stdout)


def test_every_command_has_help_with_an_example(command):
    listed = command("--help")[1].split("Commands:")[1].split("\n\n")[0]
    names = [line.split()[0] for line in listed.splitlines() if line.startswith("  ") and line[2] != " "]
    assert {"init", "add-samples", "add-block", "remove-block", "check", "prepare", "run", "status"} <= set(
        names
    )
    for name in names:
        code, out, _ = command(name, "--help")
        assert code == 0
        assert f"Example: workbench {name}" in out


def test_quiet_leaves_messages_out(command, made):
    code, out, err = command("run", "--quiet", "--project", made)
    assert (code, err) == (0, "")
    assert "edges.tsv" in out


def test_help_answers_within_four_tenths_of_a_second():
    """Or twenty times a bare interpreter, on a slow machine; the best of five counts."""

    def seconds(*words):
        started = time.perf_counter()
        subprocess.run([sys.executable, *words], capture_output=True, check=True)
        return time.perf_counter() - started

    bare = min(seconds("-c", "pass") for _ in range(5))
    assert min(seconds("-m", "workbench", "--help") for _ in range(5)) < max(0.4, 20 * bare)


def test_check_files_tells_what_is_missing_and_can_be_made_again(command, made):
    (made / "blocks" / "rna.h5ad").unlink()
    code, out, _ = command("check", "--files", "--project", made)
    assert code == 0
    assert "1 that can be made again are missing" in out
