"""The command ``guide``: the built-in handbook."""

from __future__ import annotations

from importlib.resources import files
from typing import Annotated

import typer

from workbench.cli.console import answer


def register(app: typer.Typer) -> None:
    """Add the command to the program."""
    app.command("guide", epilog="Example: workbench guide edges")(guide)


def pages() -> dict[str, str]:
    """Return the handbook's pages by topic."""
    folder = files("workbench") / "guide"
    found = {page.name.removesuffix(".md"): page for page in folder.iterdir() if page.name.endswith(".md")}
    return {topic: found[topic].read_text("utf-8") for topic in sorted(found)}


def guide(
    topic: Annotated[
        str | None, typer.Argument(metavar="[TOPIC]", help="Page; without one: the list.")
    ] = None,
) -> None:
    """Read the built-in handbook."""
    from difflib import get_close_matches

    from workbench.errors import InputError

    found = pages()
    if topic is None:
        answer(["pages of the handbook:", *(f"  workbench guide {name}" for name in found)])
    elif topic in found:
        answer(found[topic].splitlines())
    else:
        near = get_close_matches(topic, found, 1)
        hint = f"; did you mean '{near[0]}'?" if near else ""
        raise InputError(f"no page '{topic}' in the handbook; pages: {', '.join(found)}{hint}")
