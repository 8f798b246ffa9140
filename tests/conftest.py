"""Shared fixtures: a small simulated study on disk, and a project made of it."""

import shutil
import sys

import pytest
from hypothesis import settings
from simulated import Design, metabolites, simulate, transcripts

# A busy machine is no fault of the code: the time that one case takes is not tested.
settings.register_profile("any machine", deadline=None)
settings.load_profile("any machine")

SMALL = Design(
    n=24,
    blocks=(
        transcripts(features=120, module_size=15, private_factors=1),
        metabolites(features=40, module_size=6, private_factors=1),
    ),
    modules=2,
    strength=2.5,
    run_days=2,
)


QUICK = "permutations = 200\nrepeats = 2\n\n[analyses.main.network]\nremove_private = false\n"


@pytest.fixture(scope="session")
def delivered(tmp_path_factory):
    """Return the files of a small study by name, as they were delivered."""
    return simulate(SMALL, seed=11).write(tmp_path_factory.mktemp("delivered"))


@pytest.fixture
def command(capsys, monkeypatch):
    """Return a function that runs one command and returns (exit code, standard output, standard error)."""
    from workbench.cli.main import run

    def call(*words):
        monkeypatch.setattr(sys, "argv", ["workbench", *map(str, words)])
        capsys.readouterr()
        try:
            run()
            code = 0
        except SystemExit as stop:
            code = stop.code or 0
        printed = capsys.readouterr()
        return code, printed.out, printed.err

    return call


def make_project(folder, delivered):
    """Make a project of the delivered files in a new folder."""
    from workbench import Project

    project = Project.create(folder, title="A small study")
    project.add_samples(delivered["samples"], group="group", adjust="run_day")
    project.add_block("rna", delivered["transcripts"], layer="transcripts", values="counts")
    project.add_block("lcms", delivered["metabolites"], layer="metabolites", values="intensities")
    settings = (folder / "project.toml").read_text()
    (folder / "project.toml").write_text(settings + QUICK)
    return project


@pytest.fixture(scope="session")
def made_once(tmp_path_factory, delivered):
    """Return the folder of a project that was added to and not yet run; never change it."""
    folder = tmp_path_factory.mktemp("made") / "study"
    make_project(folder, delivered)
    return folder


@pytest.fixture(scope="session")
def run_once(tmp_path_factory, made_once):
    """Return the folder of a project that was run; never change it."""
    from workbench import Project

    folder = tmp_path_factory.mktemp("run") / "study"
    shutil.copytree(made_once, folder)
    Project.open(folder).run()
    return folder


@pytest.fixture
def made(tmp_path, made_once):
    """Return a copy of the project that was not yet run."""
    return shutil.copytree(made_once, tmp_path / "study")


@pytest.fixture
def finished(tmp_path, run_once):
    """Return a copy of the project that was run."""
    return shutil.copytree(run_once, tmp_path / "study")
