"""The command ``guide``: the built-in handbook."""

from __future__ import annotations

from importlib.resources import files
from typing import Annotated

import typer

from workbench.cli.console import answer

KINDS = (
    ("transcripts", "counts"),
    ("microbes", "counts"),
    ("metabolites", "intensities"),
    ("proteins", "log"),
    ("microbes", "proportions"),
    ("methylation", "beta"),
    ("clinical", "continuous"),
    ("clinical", "mixed"),
)


def register(app: typer.Typer) -> None:
    """Add the command to the program."""
    app.command("guide", epilog="Example: workbench guide edges")(guide)


def pages() -> dict[str, str]:
    """Return the handbook's pages by topic."""
    folder = files("workbench") / "guide"
    found = {page.name.removesuffix(".md"): page for page in folder.iterdir() if page.name.endswith(".md")}
    texts = {topic: found[topic].read_text("utf-8") for topic in sorted(found)}
    texts["prepare"] += preparation_keys()
    return texts


def preparation_keys() -> str:
    """Return the choices of the preparation by kind of values, from the schema that accepts them."""
    from workbench.settings import prepare_keys

    parts = []
    for layer, values in KINDS:
        rows = [
            f"- `{one.key}` = {one.default} ({one.allowed}): {one.reason}"
            for one in prepare_keys(layer, values)
        ]
        parts.append("\n".join([f"## values = {values}, layer {layer}", "", *rows, ""]))
    return "\n".join(parts)


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
        answer(["pages of the handbook:", *(f"  workbench guide {line}" for line in _contents(found))])
    elif topic in found:
        answer(found[topic].splitlines())
    else:
        near = get_close_matches(topic, found, 1)
        hint = f"; did you mean '{near[0]}'?" if near else ""
        raise InputError(f"no page '{topic}' in the handbook; pages: {', '.join(found)}{hint}")


def _contents(texts: dict[str, str]) -> list[str]:
    """Return each topic with what its page is about, which its first line says behind the colon."""
    wide = max(map(len, texts))
    titles = {topic: text.splitlines()[0].partition(": ")[2] for topic, text in texts.items()}
    return [f"{topic:<{wide}}  {title}".rstrip() for topic, title in titles.items()]
