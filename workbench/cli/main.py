"""The program: its commands, and the one place where errors become messages and exit codes."""

from __future__ import annotations

import sys
import tempfile
import traceback
from pathlib import Path
from typing import Annotated

import typer

from workbench import __version__
from workbench.cli import (
    apply,
    blocks,
    checks,
    compare,
    guide,
    pathways,
    plan,
    projects,
    samples,
    show,
    stages,
)
from workbench.cli.console import complain
from workbench.errors import WorkbenchError

BUG_EXIT = 70
INTERRUPTED = 130

EPILOG = (
    "A study in five commands: workbench init DIR; workbench add-samples SHEET --group COLUMN; "
    "workbench add-block (twice); workbench run. Each command has --help with an example."
)

app = typer.Typer(
    name="workbench",
    help="From delivered omics tables of one study to a tested cross-layer network.",
    epilog=EPILOG,
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["--help", "-h"], "max_content_width": 100},
)
for noun in (projects, samples, blocks, checks, stages, pathways, show, compare, plan, apply, guide):
    noun.register(app)


def _version(asked: bool) -> None:
    if asked:
        typer.echo(f"workbench {__version__}")
        raise typer.Exit


@app.callback()
def main(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version and stop.")
    ] = False,
) -> None:
    """From delivered omics tables of one study to a tested cross-layer network."""
    del version


def run() -> None:
    """Run the command line; every error ends as a message and an exit code, never as a traceback."""
    try:
        app()
    except SystemExit as stop:
        if stop.code == INTERRUPTED:
            complain("interrupted; what was finished stays, and the same command goes on from there")
        raise
    except WorkbenchError as error:
        complain(str(error))
        sys.exit(error.exit_code)
    except OSError as error:
        where = f"{error.filename}: " if error.filename else ""
        complain(
            f"{where}{error.strerror or error}; mend this and run the command again, nothing was half-written"
        )
        sys.exit(3)
    except MemoryError:
        complain(
            "not enough memory for this step; close other programs, or leave features out of the largest block"
        )
        sys.exit(3)
    except Exception:
        complain(f"a bug in the program; its details were written to {_bug_report()}")
        sys.exit(BUG_EXIT)


def _bug_report() -> Path:
    with tempfile.NamedTemporaryFile(
        "w", prefix="workbench-bug-", suffix=".txt", delete=False, encoding="utf-8"
    ) as file:
        file.write(
            f"workbench {__version__}, Python {sys.version}\n{' '.join(sys.argv)}\n\n{traceback.format_exc()}"
        )
    return Path(file.name)
