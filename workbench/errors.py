"""Errors that a user may meet: one base class, caught in one place by the command line.

Every message says what is wrong, where (file, line, column, feature), why, and the way out.
"""

from __future__ import annotations

from collections.abc import Iterable


class WorkbenchError(Exception):
    """Base of all errors that are explained to the user; ``exit_code`` is the command's."""

    exit_code = 2


class InputError(WorkbenchError):
    """A delivered table, a sample sheet or an argument cannot be used as it is."""


class SettingsError(WorkbenchError):
    """``project.toml`` has faults; ``faults`` holds one line for each of them."""

    def __init__(self, faults: Iterable[str]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(self.faults))


class NumericsError(WorkbenchError, ValueError):
    """The numbers given to the engine do not allow what was asked of it."""


class FindingsError(WorkbenchError):
    """The data have an error finding that nobody accepted."""

    exit_code = 1


class BusyError(WorkbenchError):
    """Another command is changing the project."""

    exit_code = 3


class StorageError(WorkbenchError):
    """A file of the project cannot be written: no permission, no room, a read-only disk."""

    exit_code = 3


class DamageError(WorkbenchError):
    """A stored file is not what the program wrote, or cannot be read."""

    exit_code = 3
