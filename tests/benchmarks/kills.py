"""What is left of a project whose command was killed, at random moments and in the middle of writing.

Run ``python tests/benchmarks/kills.py [KILLS] [SEED]``: half of the kills hit ``run``, half
``add-block``, each followed by ``status``, ``check --files``, the command again where it had not come to
its end, and ``run``. Every file must then be as it is without a kill. Exit 1 when one is not.
"""

from __future__ import annotations

import json
import os
import random
import shutil
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

SAMPLES, COUNTS, INTENSITIES = 16, 120, 40
ENVIRONMENT = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "NO_COLOR": "1"}
HIDDEN, JOURNAL, TIMED = ".workbench", "journal.jsonl", "timing.json"
LIMIT = 300
"""Seconds after which a command counts as hanging."""


@dataclass(frozen=True)
class Case:
    """A command to kill: its words, the project before it, the project when all is done, its seconds alone."""

    name: str
    command: tuple[str, ...]
    before: Path
    after: Path
    seconds: float


@dataclass(frozen=True)
class Moment:
    """When to kill: so many seconds after the start, or after the ``sight``-th unfinished file is seen."""

    seconds: float
    sight: int = 0


@dataclass(frozen=True)
class Kill:
    """What a kill met: whether the command had ended, and the unfinished files that were left."""

    ended: bool
    left: tuple[str, ...]


def delivered_tables(folder: Path) -> dict[str, Path]:
    """Write a sample sheet, counts and intensities with two shared modules, and return their paths."""
    rng = np.random.default_rng(3)
    samples = [f"S{i + 1:02d}" for i in range(SAMPLES)]
    state = rng.standard_normal((SAMPLES, 2))
    counts = rng.poisson(np.exp(5 + _module_values(state, COUNTS, rng)))
    intensities = np.exp(10 + _module_values(state, INTENSITIES, rng))
    paths = {name: folder / f"{name}.tsv" for name in ("samples", "counts", "intensities")}
    tables = {
        "samples": pd.DataFrame({"sample": samples, "condition": ["watered", "drought"] * (SAMPLES // 2)}),
        "counts": pd.DataFrame(counts.T, [f"g{i}" for i in range(COUNTS)], samples)
        .rename_axis("gene")
        .reset_index(),
        "intensities": pd.DataFrame(intensities, columns=[f"m{j}" for j in range(INTENSITIES)]),
    }
    tables["intensities"].insert(0, "sample", samples)
    for name, path in paths.items():
        tables[name].to_csv(path, sep="\t", index=False)
    return paths


def _module_values(state: np.ndarray, features: int, rng: np.random.Generator) -> np.ndarray:
    """Return values of which the first and the second fifth of features follow one factor each."""
    fifth = np.arange(features) * 5 // features
    carried = 0.9 * (state[:, :1] * (fifth == 0) + state[:, 1:] * (fifth == 1))
    return carried + 0.3 * rng.standard_normal((len(state), features))


def workbench(project: Path, *words: str | Path) -> subprocess.CompletedProcess[str]:
    """Run one command on a project and return what it answered."""
    return subprocess.run(
        _words(project, words), env=ENVIRONMENT, capture_output=True, text=True, timeout=LIMIT, check=False
    )


def _words(project: Path, words: tuple[str | Path, ...]) -> list[str]:
    """Return the words of a process that runs a command on a project."""
    return [sys.executable, "-m", "workbench", *map(str, words), "--project", str(project)]


def must(project: Path, *words: str | Path) -> str:
    """Return the answer of a command that has to succeed."""
    done = workbench(project, *words)
    if done.returncode:
        raise RuntimeError(f"{' '.join(map(str, words))}: exit {done.returncode}\n{done.stdout}{done.stderr}")
    return done.stdout


def make_cases(folder: Path) -> dict[str, Case]:
    """Make the projects before ``add-block`` and before ``run``, and what both come to without a kill."""
    tables = delivered_tables(folder)
    one, two, whole = (folder / name for name in ("one", "two", "whole"))
    done = subprocess.run(
        [sys.executable, "-m", "workbench", "init", str(one)], env=ENVIRONMENT, capture_output=True, text=True
    )
    if done.returncode:
        raise RuntimeError(f"init: exit {done.returncode}\n{done.stdout}{done.stderr}")
    must(one, "add-samples", tables["samples"], "--group", "condition")
    must(one, "add-block", "rna", tables["counts"], "--layer", "transcripts", "--values", "counts")
    add = (
        "add-block",
        "lcms",
        str(tables["intensities"]),
        "--layer",
        "metabolites",
        "--values",
        "intensities",
    )
    shutil.copytree(one, two)
    start = time.perf_counter()
    must(two, *add)
    added = time.perf_counter()
    shutil.copytree(two, whole)
    copied = time.perf_counter()
    must(whole, "run")
    ran = time.perf_counter()
    return {
        "run": Case("run", ("run",), two, whole, ran - copied),
        "add-block": Case("add-block", add, one, whole, added - start),
    }


def kept_files(project: Path) -> dict[str, bytes]:
    """Return the content of every file but the hidden ones, the journal and the timings."""
    files = (path for path in project.rglob("*") if path.is_file() and path.name not in (JOURNAL, TIMED))
    relative = {path.relative_to(project): path for path in files}
    return {name.as_posix(): path.read_bytes() for name, path in relative.items() if name.parts[0] != HIDDEN}


def unfinished(project: Path) -> list[str]:
    """Return the files that only a change under way has: neighbours and lists of steps."""
    found = []
    for folder, _, names in os.walk(project):
        hidden = Path(folder).name == HIDDEN
        found += [f"{Path(folder).relative_to(project)}/{n}" for n in names if n.endswith(".part")]
        found += [f"{HIDDEN}/{n}" for n in names if hidden and n.startswith(("pending", "undo"))]
    return sorted(found)


def moments(case: Case, kills: int, seed: int) -> Iterator[Moment]:
    """Yield moments in turn: any time of the command, and shortly after some unfinished file is seen."""
    rng = random.Random(f"{case.name} {seed}")
    for number in range(kills):
        if number % 2:
            yield Moment(rng.uniform(0, 0.004), rng.randint(1, 12))
        else:
            yield Moment(rng.uniform(0, 1.1 * case.seconds))


def kill(case: Case, project: Path, moment: Moment) -> Kill:
    """Start the command of a case on a project, kill it at the moment, and return what was met."""
    process = subprocess.Popen(
        _words(project, case.command),
        env=ENVIRONMENT,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
        start_new_session=True,
    )
    if moment.sight:
        _wait_for_sight(process, project, moment.sight)
    time.sleep(moment.seconds)
    ended = process.poll() is not None
    if not ended:
        os.killpg(process.pid, signal.SIGKILL)
    process.wait(timeout=LIMIT)
    return Kill(ended, tuple(unfinished(project)))


def _wait_for_sight(process: subprocess.Popen[bytes], project: Path, number: int) -> None:
    """Return when so many different unfinished files have been seen, or the process has ended."""
    seen: set[str] = set()
    while len(seen) < number and process.poll() is None:
        seen.update(unfinished(project))


def faults_after(case: Case, project: Path) -> list[str]:
    """Return what is wrong with a project after a kill; it is brought to its end on the way."""
    faults = _refusals(project, "status") + _refusals(project, "check", "--files")
    if not faults and "[blocks.lcms]" not in (project / "project.toml").read_text("utf-8"):
        faults += _refusals(project, *case.command)
    faults += _refusals(project, "run")
    if faults:
        return faults
    faults = [f"{name}: an unfinished file is left" for name in unfinished(project)]
    found, wanted = kept_files(project), kept_files(case.after)
    different = sorted(name for name in wanted | found if wanted.get(name) != found.get(name))
    faults += [f"{name}: not what it is without a kill" for name in different]
    return faults + _journal_faults(project)


def _refusals(project: Path, *words: str) -> list[str]:
    """Return a sentence when a command does not succeed."""
    done = workbench(project, *words)
    return [f"{words[0]}: exit {done.returncode}: {done.stderr.strip()}"] if done.returncode else []


def _journal_faults(project: Path) -> list[str]:
    """Return a sentence when a line of the journal is no JSON or a block is not in it exactly once."""
    try:
        lines = [json.loads(line) for line in (project / JOURNAL).read_text("utf-8").splitlines()]
    except ValueError as error:
        return [f"{JOURNAL}: {error}"]
    blocks = sorted(line["block"] for line in lines if line["command"].startswith("add-block"))
    return [] if blocks == ["lcms", "rna"] else [f"{JOURNAL}: blocks added: {blocks}"]


def trial(case: Case, folder: Path, moment: Moment) -> tuple[Kill, list[str]]:
    """Kill the command of a case on a copy of its project; return what was met and what is wrong after."""
    project = folder / "killed"
    shutil.copytree(case.before, project)
    try:
        met = kill(case, project, moment)
        return met, faults_after(case, project)
    finally:
        shutil.rmtree(project)


def kill_often(case: Case, folder: Path, kills: int, seed: int) -> int:
    """Print each kill of a case and what they met; return after how many something was wrong."""
    met, wrong = [], 0
    for moment in moments(case, kills, seed):
        found, faults = trial(case, folder, moment)
        met.append(found)
        wrong += bool(faults)
        since = f"unfinished file {moment.sight}" if moment.sight else "its start"
        told = "had ended" if found.ended else f"killed, {len(found.left)} unfinished files left"
        print(f"{case.name}, {moment.seconds:.3f} s after {since}: {told}", flush=True)
        print("".join(f"  WRONG: {fault}\n" for fault in faults), end="", flush=True)
    hit, torn = sum(not one.ended for one in met), sum(bool(one.left) for one in met)
    decided = sum(any(name.startswith(f"{HIDDEN}/pending") for name in one.left) for one in met)
    print(f"{case.name} takes {case.seconds:.1f} s alone; {hit} of {kills} were killed before their end,")
    print(f"{torn} left unfinished files, {decided} a list of steps to finish; {wrong} were not made good")
    return wrong


def main(kills: int = 30, seed: int = 1) -> int:
    """Kill each command half so many times; return the exit code."""
    with tempfile.TemporaryDirectory() as name:
        cases = make_cases(Path(name)).values()
        wrong = sum(kill_often(case, Path(name), kills // 2, seed) for case in cases)
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main(*map(int, sys.argv[1:3])))
