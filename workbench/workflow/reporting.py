"""What a long job tells while it works: sentences and counts, to whoever listens."""

from __future__ import annotations

from collections.abc import Callable
from contextlib import AbstractContextManager, nullcontext

Progress = Callable[[int, int], None]


class Reporter:
    """Listener that keeps silent; the command line has one that writes to standard error."""

    def say(self, text: str) -> None:
        """Take one sentence about what is being done or was found."""

    def progress(self, label: str) -> AbstractContextManager[Progress | None]:
        """Return a context whose value is called as ``progress(done, total)`` while ``label`` runs."""
        del label
        return nullcontext(None)


SILENT = Reporter()
