"""Real processes: killed in the middle of changes, kept out by the lock, stopped by a limit of the disk."""

import os
import signal
import subprocess
import sys
import time

import pytest

from workbench.errors import BusyError
from workbench.store.hashes import check_all
from workbench.store.journal import read_journal
from workbench.store.lock import project_lock, read_holder

WRITER = """
import sys
from pathlib import Path
from workbench.store.lock import project_lock
from workbench.store.transaction import Change

root = Path(sys.argv[1])
number = int((root / "results/main/one.txt").read_text()) if (root / "results/main/one.txt").exists() else 0
while True:
    with project_lock(root, "writer"):
        number += 1
        with Change(root) as change:
            for name in ("one", "two"):
                change.write_text(f"results/main/{name}.txt", str(number))
            change.write_text(f"results/main/only_{number}.txt", "x" * 5000)
            change.remove(f"results/main/only_{number - 1}.txt")
            change.commit({"command": "writer", "number": number})
    print(number, flush=True)
"""

HOLDER = """
import sys, time
from pathlib import Path
from workbench.store.lock import project_lock

with project_lock(Path(sys.argv[1]), "workbench run"):
    print("held", flush=True)
    time.sleep(60)
"""

LIMITED = """
import resource, signal, sys
from pathlib import Path
from workbench.errors import WorkbenchError
from workbench.store.transaction import Change

signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
resource.setrlimit(resource.RLIMIT_FSIZE, (3000, 3000))
try:
    with Change(Path(sys.argv[1])) as change:
        change.write_text("results/main/small.txt", "small")
        change.write_text("results/main/large.txt", "x" * 5000)
        change.commit({"command": "large"})
except WorkbenchError as error:
    print(type(error).__name__, error)
"""


def started(program, root):
    """Start a program on a project and wait for its first line."""
    process = subprocess.Popen(
        [sys.executable, "-c", program, str(root)], stdout=subprocess.PIPE, text=True, env={**os.environ}
    )
    return process, process.stdout.readline().strip()


def killed(process):
    process.send_signal(signal.SIGKILL)
    process.communicate()


def test_a_killed_writer_leaves_two_files_of_one_state_and_a_whole_journal(tmp_path):
    for wait in (0.0, 0.013, 0.031, 0.047):
        process, first = started(WRITER, tmp_path)
        time.sleep(wait)
        killed(process)
        with project_lock(tmp_path, "check"):
            results = tmp_path / "results/main"
            number = (results / "one.txt").read_text()
            assert int(number) >= int(first)
            names = sorted(path.name for path in results.iterdir())
            assert names == ["one.txt", f"only_{number}.txt", "two.txt"]
            assert (results / "two.txt").read_text() == number
            assert [line["number"] for line in read_journal(tmp_path)] == list(range(1, int(number) + 1))
            assert check_all(tmp_path) == []


def test_a_second_command_is_told_who_holds_the_project(tmp_path):
    process, _ = started(HOLDER, tmp_path)
    try:
        told = rf"`workbench run` \(process {process.pid} on .+\) has been changing this project since 20..-"
        with pytest.raises(BusyError, match=told), project_lock(tmp_path, "second"):
            pytest.fail("two commands held the project at once")
        assert read_holder(tmp_path).process == process.pid
    finally:
        killed(process)
    assert read_holder(tmp_path) is None
    with project_lock(tmp_path, "third"):
        assert read_holder(tmp_path).command == "third"
    assert not (tmp_path / ".workbench/holder.json").exists()


def test_a_file_too_large_for_the_disk_is_one_message_and_no_trace(tmp_path):
    done = subprocess.run(
        [sys.executable, "-c", LIMITED, str(tmp_path)], capture_output=True, text=True, check=True
    )
    assert done.stderr == ""
    assert done.stdout.startswith("StorageError ")
    assert "is full; free some space and run the command again; nothing was changed" in done.stdout
    assert [path.name for path in tmp_path.iterdir()] == []
