"""What goes to the terminal: results on standard output, messages and progress on standard error."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

import typer

if TYPE_CHECKING:
    from workbench.workflow.reporting import Progress, Reporter


def complain(text: str) -> None:
    """Print an error on standard error, whole, markup untouched."""
    _echo(f"error: {text}", err=True)


def tell(text: str, *, quiet: bool = False) -> None:
    """Print a message on standard error unless asked to be quiet."""
    if not quiet:
        _echo(text, err=True)


def tell_lines(lines: Iterable[str]) -> None:
    """Print messages on standard error, asked to be quiet or not: they may change what an answer is worth."""
    for line in lines:
        tell(line)


def tell_next(command: str, *, quiet: bool = False) -> None:
    """Print the next command to type."""
    tell(f"next: {command}", quiet=quiet)


def answer(lines: Iterable[str]) -> None:
    """Print results on standard output."""
    for line in lines:
        _echo(line)


def answer_whole(text: str) -> None:
    """Print a text on standard output as it is."""
    _echo(text, newline=False)


def _echo(text: str, *, err: bool = False, newline: bool = True) -> None:
    """Print a text; a reader that has seen enough (``| head -1``) ends the printing, not the command."""
    try:
        typer.echo(text, err=err, nl=newline)
    except BrokenPipeError:
        stream = sys.stderr if err else sys.stdout
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, stream.fileno())
        os.close(nowhere)


def terminal_reporter(quiet: bool) -> Reporter:
    """Return a listener that writes sentences, and draws progress where standard error is a terminal."""
    from workbench.workflow.reporting import SILENT, Reporter

    if quiet:
        return SILENT

    class TerminalReporter(Reporter):
        def say(self, text: str) -> None:
            tell(text)

        @contextmanager
        def progress(self, label: str) -> Iterator[Progress | None]:
            if not sys.stderr.isatty():
                yield None
                return
            with _bar(label) as update:
                yield update

    return TerminalReporter()


@contextmanager
def _bar(label: str) -> Iterator[Progress]:
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (
        TextColumn("  {task.description}", markup=False),
        BarColumn(),
        MofNCompleteColumn(),
        TimeRemainingColumn(),
    )
    with Progress(*columns, console=Console(stderr=True), transient=True) as drawn:
        task = drawn.add_task(label, total=None)
        yield lambda done, total: drawn.update(task, completed=done, total=total)
