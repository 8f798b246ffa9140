"""Edits of ``project.toml`` by commands: text in, text out; what is not meant stays byte for byte.

Each edit is first made on the single statements that it touches, then, where a text is laid out in an unusual
way (inline tables, dotted keys), on the whole by tomlkit. Either way the result is read again and must hold
exactly what was meant; otherwise the edit is refused with the lines to write by hand.
"""

from __future__ import annotations

import copy
import tomllib
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path as FilePath
from typing import Any

import tomlkit
import tomlkit.exceptions

from workbench.errors import InputError, SettingsError
from workbench.settings.load import parse_toml
from workbench.settings.names import check_name, hint
from workbench.settings.splice import Changes, spliced, toml_item, toml_key, toml_value, without_tables
from workbench.settings.statements import Path

_FILE = FilePath("project.toml")
_BOM = "\ufeff"


def new_project(title: str) -> str:
    """Return the text of a new ``project.toml``.

    Examples
    --------
    >>> print(new_project("Drought"), end="")
    # One study: what it is about, its samples, its tables, its analyses.
    # Commands add to this file; what you write, comments too, stays as it is.
    format = 1
    <BLANKLINE>
    [study]
    title = "Drought"
    organism = ""
    question = ""
    <BLANKLINE>
    [samples]
    id = "sample"
    """
    return (
        "# One study: what it is about, its samples, its tables, its analyses.\n"
        "# Commands add to this file; what you write, comments too, stays as it is.\n"
        "format = 1\n"
        "\n"
        "[study]\n"
        f"title = {toml_value(title)}\n"
        'organism = ""\n'
        'question = ""\n'
        "\n"
        "[samples]\n"
        'id = "sample"\n'
    )


def set_samples(
    text: str,
    *,
    id: str | None = None,
    group: str | Sequence[str] | None = None,
    subject: str | None = None,
    time: str | None = None,
    adjust: Sequence[str] | None = None,
    kinds: Mapping[str, str] | None = None,
) -> str:
    """Return the text with entries of ``[samples]`` set; what is None or empty stays as it is.

    Parameters
    ----------
    text : str
        Of a ``project.toml``.
    id, group, subject, time, adjust
        Columns of the sample sheet; a group of one column is written as a text, of several as a list.
    kinds : mapping of str to str
        How columns are read; joined with the kinds that are there.

    Raises
    ------
    SettingsError
        When the text is not TOML, or laid out so that it cannot be edited safely.
    """
    factors = [group] if isinstance(group, str) else list(group or ())
    wanted: dict[str, Any] = {
        "id": id,
        "group": factors[0] if len(factors) == 1 else factors,
        "subject": subject,
        "time": time,
        "adjust": list(adjust or ()),
    }
    changes: dict[tuple[Path, str], Any] = {
        (("samples",), key): value for key, value in wanted.items() if value
    }
    changes |= {(("samples", "kinds"), column): kind for column, kind in (kinds or {}).items()}
    return _changed(text, changes)


def add_block(text: str, name: str, entries: Mapping[str, Any]) -> str:
    """Return the text with a block added, or with entries of a block that is there replaced.

    With the second block an analysis ``main`` over all blocks is added, unless there is an analysis already.

    Parameters
    ----------
    text : str
        Of a ``project.toml``.
    name : str
        Of the block.
    entries : mapping
        Keys and values of ``[blocks.NAME]``; None takes a key out, keys that are not named stay.

    Raises
    ------
    InputError
        When the name is not allowed.
    SettingsError
        When the text is not TOML, or laid out so that it cannot be edited safely.
    """
    check_name(name, "block")
    before = parse_toml(text, _FILE)
    changes: dict[tuple[Path, str], Any] = {(("blocks", name), key): value for key, value in entries.items()}
    blocks = before.get("blocks", {})
    if name not in blocks and len(blocks) == 1 and not before.get("analyses"):
        changes[("analyses", "main"), "blocks"] = "all"
    return _changed(text, changes)


def remove_block(text: str, name: str) -> str:
    """Return the text without a block, and without its name in the lists of the analyses.

    Comments above the block's header stay.

    Raises
    ------
    InputError
        When there is no such block.
    SettingsError
        When the text is not TOML, or laid out so that it cannot be edited safely.
    """
    before = parse_toml(text, _FILE)
    blocks = before.get("blocks", {})
    if name not in blocks:
        known = ", ".join(map(repr, blocks)) or "none"
        raise InputError(f"block {name!r} is not in the project; its blocks: {known}{hint(name, blocks)}")
    expected = copy.deepcopy(before)
    del expected["blocks"][name]
    if not expected["blocks"]:
        del expected["blocks"]
    lists: dict[tuple[Path, str], Any] = {}
    for analysis, entries in before.get("analyses", {}).items():
        listed = entries.get("blocks")
        if isinstance(listed, list) and name in listed:
            kept = [block for block in listed if block != name]
            expected["analyses"][analysis]["blocks"] = kept
            lists[("analyses", analysis), "blocks"] = kept
    return _first_that_fits(
        text,
        expected,
        (
            lambda body: without_tables(spliced(body, lists), ("blocks", name)),
            lambda body: _dropped(body, name, lists),
        ),
        f"take [blocks.{name}] out by hand",
    )


def _changed(text: str, wanted: Changes) -> str:
    changes = {place: list(value) if isinstance(value, tuple) else value for place, value in wanted.items()}
    expected = copy.deepcopy(parse_toml(text, _FILE))
    for (table, key), value in changes.items():
        here = expected
        for part in table:
            here = here.setdefault(part, {})
        here.pop(key, None) if value is None else here.update({key: value})
    by_hand = "; ".join(
        f"[{'.'.join(table)}] {toml_key(key)} = {toml_value(value)}"
        for (table, key), value in changes.items()
        if value is not None
    )
    return _first_that_fits(
        text,
        expected,
        (lambda body: spliced(body, changes), lambda body: _set_by_tomlkit(body, changes)),
        f"write by hand: {by_hand}",
    )


def _first_that_fits(
    text: str, expected: Mapping[str, Any], ways: Sequence[Callable[[str], str]], by_hand: str
) -> str:
    """Return the first edited text that holds what was meant."""
    body = text.removeprefix(_BOM)
    bom = _BOM if body != text else ""
    for way in ways:
        try:
            edited = way(body)
            if _same(tomllib.loads(edited), expected):
                return bom + edited
        except (ValueError, KeyError, TypeError, tomlkit.exceptions.TOMLKitError):
            continue
    raise SettingsError([f"{_FILE}: is laid out in a way that this program cannot edit; {by_hand}"])


def _same(found: Mapping[str, Any], expected: Mapping[str, Any]) -> bool:
    """Return whether two readings hold the same; an empty table is as good as none."""
    return {k: v for k, v in found.items() if v != {}} == {k: v for k, v in expected.items() if v != {}}


def _set_by_tomlkit(text: str, changes: Changes) -> str:
    document = tomlkit.parse(text)
    for (table, key), value in changes.items():
        here: Any = document
        for part in table:
            if part not in here:
                here[part] = tomlkit.table() if here is document else tomlkit.inline_table()
            here = here[part]
        if value is not None:
            here[key] = toml_item(value)
        elif key in here:
            del here[key]
    return document.as_string()


def _dropped(text: str, name: str, lists: Changes) -> str:
    document: Any = tomlkit.parse(_set_by_tomlkit(text, lists))
    del document["blocks"][name]
    if not document["blocks"]:
        del document["blocks"]
    return str(document.as_string())
