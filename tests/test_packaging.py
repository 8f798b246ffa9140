"""What a user installs: the wheel, from another folder, with its templates; and the README's words."""

import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text("utf-8")
COPIED = ("README.md", "pyproject.toml", "workbench", "templates", "example_project")


def shell_lines(heading):
    """Return the commands of the first shell block below a heading of the README."""
    part = README.split(f"## {heading}\n", 1)[1]
    return re.search(r"```sh\n(.*?)```", part, re.DOTALL)[1].splitlines()


@pytest.fixture
def clone(tmp_path):
    """Return a copy of what the repository keeps and an installation needs."""
    ignore = shutil.ignore_patterns("__pycache__", "blocks", "prepared", "results", ".workbench")
    for name in COPIED:
        source = ROOT / name
        if source.is_dir():
            shutil.copytree(source, tmp_path / "clone" / name, ignore=ignore)
        else:
            (tmp_path / "clone").mkdir(exist_ok=True)
            shutil.copy(source, tmp_path / "clone" / name)
    return tmp_path / "clone"


def run(*words, **more):
    return subprocess.run(list(map(str, words)), capture_output=True, text=True, check=True, **more)


def test_the_wheel_carries_its_templates_and_works_from_another_folder(clone, tmp_path):
    wheels, site, away = tmp_path / "wheels", tmp_path / "site", tmp_path / "away"
    away.mkdir()
    pip = (sys.executable, "-m", "pip")
    run(*pip, "wheel", "--no-deps", "--no-build-isolation", "-q", "-w", wheels, clone)
    wheel = next(wheels.glob("crosslayer_workbench-*.whl"))
    run(*pip, "install", "--no-deps", "-q", "--target", site, wheel)
    environment = {"PYTHONPATH": str(site), "PATH": "/usr/bin:/bin"}
    where = run(
        sys.executable, "-c", "import workbench; print(workbench.__file__)", cwd=away, env=environment
    )
    assert str(site) in where.stdout
    run(sys.executable, "-m", "workbench", "init", "study", cwd=away, env=environment)
    assert (away / "study" / "project.toml").exists()
    assert (site / "workbench" / "templates" / "two-layers" / "project.toml").exists()


@pytest.mark.slow
def test_the_first_command_of_the_readme_finds_the_planted_modules(clone):
    """The command word for word, in a fresh environment; three in four edges join two ends of one module."""
    first = shell_lines("Two commands")[0]
    done = subprocess.run(
        ["bash", "-euo", "pipefail", "-c", first], cwd=clone, capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    assert "results/main/edges.tsv" in done.stdout
    lines = (clone / "example_project" / "planted.tsv").read_text().splitlines()[1:]
    module = {line.split("\t")[1]: line.split("\t")[2] for line in lines}
    rows = (clone / "example_project" / "results" / "main" / "edges.tsv").read_text().splitlines()[1:]
    ends = [(row.split("\t")[0], row.split("\t")[2]) for row in rows]
    right = [module.get(a) == module.get(b) and module.get(a, "").startswith("module") for a, b in ends]
    assert len(ends) > 100
    assert sum(right) / len(right) >= 0.9
    assert {module[a] for (a, _), good in zip(ends, right, strict=True) if good} == {
        f"module {k}" for k in range(1, 5)
    }


def test_the_second_command_of_the_readme_is_the_one_that_ci_runs():
    second = shell_lines("Two commands")[1]
    pattern = re.search(r"sed -n 's/(.*?)/\\1/p'", (ROOT / ".ci" / "run").read_text())[1]
    assert re.fullmatch(pattern.replace(r"\(", "(").replace(r"\)", ")").replace(r"\/", "/"), second)


def test_a_first_study_of_the_readme_is_a_whole_study(command, monkeypatch, tmp_path):
    source = ROOT / "example_project" / "source"
    for file in ("plants.tsv", "counts.tsv", "metabolites.csv"):
        shutil.copy(source / file, tmp_path / file)
    # The example's metabolites arrived with two tubes exchanged, which stops a run; these come in right.
    table = (tmp_path / "metabolites.csv").read_text()
    right = table.replace("\nB05,", "\n#,").replace("\nB31,", "\nB05,").replace("\n#,", "\nB31,")
    (tmp_path / "metabolites.csv").write_text(right)
    monkeypatch.chdir(tmp_path)
    for line in shell_lines("A first study of your own"):
        words = [word.strip('"') for word in re.findall(r'"[^"]*"|\S+', line)]
        if words[0] == "cd":
            monkeypatch.chdir(words[1])
            continue
        assert words[0] == "workbench"
        code, _, err = command(*words[1:])
        assert code == 0, f"{line}\n{err}"
    assert (tmp_path / "my_study" / "results" / "main" / "network.graphml").exists()
