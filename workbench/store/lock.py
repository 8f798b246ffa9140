"""One writer at a time: the lock of a project, and who holds it."""

from __future__ import annotations

import json
import os
import socket
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import asdict, dataclass
from datetime import UTC, datetime
from pathlib import Path

from filelock import FileLock, Timeout

from workbench.errors import BusyError, WorkbenchError
from workbench.store.files import explained, make_folders, unlink_if_there, write_whole
from workbench.store.paths import ProjectPaths
from workbench.store.pending import change_under_way
from workbench.store.recovery import recover

LOCK_NAME = "lock"
HOLDER_NAME = "holder.json"


@dataclass(frozen=True)
class Holder:
    """Who holds a project's lock.

    Attributes
    ----------
    process : int
        Its id on the machine.
    machine : str
    command : str
    since : str
        Time of taking the lock, ISO, UTC.
    """

    process: int
    machine: str
    command: str
    since: str


@contextmanager
def project_lock(root: Path, command: str) -> Iterator[None]:
    """Hold a project's lock; never waits. First of all, what a killed command left is put right.

    Parameters
    ----------
    root : Path
    command : str
        Shown to whoever finds the project busy, e.g. ``"workbench run"``.

    Raises
    ------
    BusyError
        When another process holds it, saying which, where, at what and since when.
    WorkbenchError
        When the project cannot be written to, or recovery is impossible.
    """
    hidden = ProjectPaths(root).hidden
    lock = FileLock(hidden / LOCK_NAME, timeout=0)
    try:
        make_folders(hidden)
        lock.acquire()
    except Timeout:
        raise BusyError(_busy(root)) from None
    except (OSError, NotImplementedError) as error:
        raise _not_writable(error, hidden) from error
    try:
        recover(root)
        _write_holder(hidden, command)
        yield
    finally:
        with suppress(OSError):
            unlink_if_there(hidden / HOLDER_NAME)
        lock.release()


def settle(root: Path) -> None:
    """Put right what a killed command left, where that is possible at once; for commands that only read.

    Nothing happens when no change is unfinished, when another command is at it, or when the project
    cannot be written to.

    Raises
    ------
    WorkbenchError
        When finishing and taking back both fail.
    """
    if not change_under_way(root) or not os.access(ProjectPaths(root).hidden, os.W_OK):
        return
    with suppress(BusyError), project_lock(root, "recovery"):
        return


def _not_writable(error: OSError | NotImplementedError, hidden: Path) -> WorkbenchError:
    if isinstance(error, OSError):
        told = explained(error, hidden)
        return type(told)(
            f"{told}; status, guide, and any command whose stages are all up to date work all the same"
        )
    return WorkbenchError(
        f"{hidden}: this file system knows no locks ({error}); copy the project to another disk"
    )


def _write_holder(hidden: Path, command: str) -> None:
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    holder = Holder(os.getpid(), socket.gethostname(), command, now)
    try:
        write_whole(hidden / HOLDER_NAME, json.dumps(asdict(holder)).encode())
    except OSError as error:
        raise explained(error, hidden) from error


def read_holder(root: Path) -> Holder | None:
    """Return who holds a project's lock; None when that is not known (or only of a dead process)."""
    try:
        holder = Holder(**json.loads((ProjectPaths(root).hidden / HOLDER_NAME).read_bytes()))
    except (OSError, ValueError, TypeError):
        return None
    return holder if _may_live(holder) else None


def _may_live(holder: Holder) -> bool:
    if holder.machine != socket.gethostname():
        return True
    try:
        os.kill(int(holder.process), 0)
    except (ProcessLookupError, ValueError, OverflowError):
        return False
    except PermissionError:
        return True
    return True


def _busy(root: Path) -> str:
    holder = read_holder(root)
    if holder is None:
        return f"{root}: another command is changing this project; try again when it is done"
    return (
        f"{root}: `{holder.command}` (process {holder.process} on {holder.machine}) has been changing this "
        f"project since {holder.since}; wait until it is done, or end that process"
    )
