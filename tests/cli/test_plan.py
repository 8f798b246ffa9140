"""What `plan` says before any data, and for a project at hand."""

import json

import pytest


def test_six_against_six_before_any_data(command, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    numbers = ("--samples", 12, "--features", 20000, "--features", 500, "--taken", 1)
    code, out, _ = command("plan", *numbers)
    assert (code, "from |r| = 0.95 up" in out) == (0, True)
    [plan] = json.loads(command("plan", *numbers, "--json")[1])["plans"]
    assert plan["pairs"] == 10_000_000
    assert plan["smallest"] == pytest.approx(0.95, abs=0.005)


def test_the_project_at_hand_gives_its_own_design(command, run_once):
    code, out, _ = command("plan", "--project", run_once, "--json")
    [plan] = json.loads(out)["plans"]
    assert (code, plan["pair"], plan["samples"], plan["rank"]) == (0, "rna x lcms", 24, 3)
    [more] = json.loads(command("plan", "--project", run_once, "--json", "--samples", 100)[1])["plans"]
    assert more["smallest"] < plan["smallest"]


def test_blocks_that_are_not_prepared_are_prepared_first(command, made):
    code, out, err = command("plan", "--project", made)
    assert (code, out.splitlines()[0]) == (0, "rna x lcms:")
    assert "running prepare rna for the first time" in err


def test_numbers_that_cannot_be_are_refused(command, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    code, _, err = command("plan", "--features", 10, "--features", 20)
    assert (code, "say its --samples too" in err) == (2, True)
    code, _, err = command("plan")
    assert (code, "--samples and --features" in err) == (2, True)
    code, _, err = command("plan", "--samples", 9, "--features", 10, "--features", 20, "--share", 2)
    assert (code, "share is 2" in err) == (2, True)
