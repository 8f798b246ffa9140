"""Edits on single statements of a TOML text: replaced, taken out, put in; all others keep their bytes."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping, Sequence
from typing import Any

import tomlkit

from workbench.settings.statements import Path, Statement, end_of_content, joined, statements, table_place

Changes = Mapping[tuple[Path, str], Any]
"""For a table and a key of it, the new value; None takes the key out."""


def spliced(text: str, changes: Changes) -> str:
    """Return the text with statements replaced, taken out and put in; all others keep their bytes."""
    newline = "\r\n" if "\r\n" in text else "\n"
    found = statements(text)
    for table in dict.fromkeys(table for table, _ in changes):
        entries = {key: value for (place, key), value in changes.items() if place == table}
        if table_place(found, table) is not None:
            found = _with_entries(found, table, entries, newline)
        elif table == ("samples", "kinds") and table_place(found, ("samples",)) is not None:
            found = _with_kinds(found, entries, newline)
        else:
            found = _with_table(found, table, entries, newline)
    return joined(found)


def _with_entries(
    found: list[Statement], table: Path, entries: Mapping[str, Any], newline: str
) -> list[Statement]:
    for key, value in entries.items():
        places = [i for i, s in enumerate(found) if s.kind == "value" and s.table == table and s.key == key]
        if places:
            [place] = places
            found[place : place + 1] = [] if value is None else [_replaced(found[place], value)]
        elif value is not None:
            header = next(i for i, s in enumerate(found) if s.kind == "header" and s.table == table)
            text = f"{toml_key(key)} = {toml_value(value)}{newline}"
            found = _put_in(
                found, end_of_content(found, header), [Statement(text, table, "value", key)], newline
            )
    return found


def _with_kinds(found: list[Statement], kinds: Mapping[str, Any], newline: str) -> list[Statement]:
    """Join kinds with the inline table that is there."""
    written = [s for s in found if s.kind == "value" and s.table == ("samples",) and s.key == "kinds"]
    before = tomllib.loads(written[0].text)["kinds"] if written else {}
    return _with_entries(found, ("samples",), {"kinds": {**before, **kinds}}, newline)


def _with_table(
    found: list[Statement], table: Path, entries: Mapping[str, Any], newline: str
) -> list[Statement]:
    """Put a new table in behind its like: behind the other blocks, before the analyses."""
    place = _place_for(found, table)
    lines = [f"[{'.'.join(map(toml_key, table))}]"]
    lines += [f"{toml_key(key)} = {toml_value(value)}" for key, value in entries.items() if value is not None]
    new = [Statement(line + newline, table, "header" if i == 0 else "value") for i, line in enumerate(lines)]
    empty = Statement(newline, table, "empty")
    if place > 0 and found[place - 1].kind != "empty":
        new = [empty, *new]
    if place < len(found) and found[place].kind != "empty":
        new = [*new, empty]
    return _put_in(found, place, new, newline)


_ORDER = ("study", "samples", "blocks", "analyses")


def _place_for(found: Sequence[Statement], table: Path) -> int:
    before = _ORDER[: _ORDER.index(table[0]) + 1]
    headers = [i for i, s in enumerate(found) if s.kind == "header"]
    behind = [i for i in headers if found[i].table[0] in before]
    if behind:
        return end_of_content(found, behind[-1])
    return len(found) if not headers else _start_of_comments(found, headers[0])


def _start_of_comments(found: Sequence[Statement], header: int) -> int:
    """Return the place before the comments right above a header."""
    place = header
    while place > 0 and found[place - 1].kind == "comment":
        place -= 1
    return place


def _put_in(found: list[Statement], place: int, new: list[Statement], newline: str) -> list[Statement]:
    """Return the statements with new ones put in; a last line without an end gets one."""
    head = list(found[:place])
    if head and not head[-1].text.endswith("\n"):
        last = head[-1]
        head[-1] = Statement(last.text + newline, last.table, last.kind, last.key)
    return [*head, *new, *found[place:]]


def _replaced(statement: Statement, value: Any) -> Statement:
    """Return a statement with another value; a comment behind it stays."""
    line = tomlkit.parse(statement.text)
    key = str(statement.key)
    old = line.unwrap()[key]
    if old == value and type(old) is type(value):
        return statement
    if isinstance(old, list) and isinstance(value, list) and value == [item for item in old if item in value]:
        array: Any = line[key]
        for place in reversed([i for i, item in enumerate(old) if item not in value]):
            del array[place]
    else:
        line[key] = toml_item(value)
    return Statement(line.as_string(), statement.table, statement.kind, statement.key)


def without_tables(text: str, table: Path) -> str:
    """Return the text without a table and those inside it."""
    found = statements(text)
    while True:
        headers = [i for i, s in enumerate(found) if s.kind == "header" and s.table[: len(table)] == table]
        if not headers:
            return joined(found)
        end = end_of_content(found, headers[0])
        lonely = headers[0] == 0 or found[headers[0] - 1].kind == "empty"
        if lonely and end < len(found) and found[end].kind == "empty":
            end += 1
        start = headers[0] - 1 if lonely and headers[0] > 0 and end == len(found) else headers[0]
        del found[start:end]


def toml_item(value: Any) -> Any:
    """Return a value as tomlkit writes it; tables on one line, lists on one line."""
    if isinstance(value, Mapping):
        table = tomlkit.inline_table()
        for key, inner in value.items():
            table[key] = toml_item(inner)
        return table
    if isinstance(value, list | tuple):
        array = tomlkit.array()
        array.extend(toml_item(inner) for inner in value)
        return array
    return tomlkit.item(value)


def toml_value(value: Any) -> str:
    """Return a value as TOML text, on one line."""
    return str(toml_item(value).as_string())


def toml_key(name: str) -> str:
    """Return a key as TOML text, in quotes where it needs them."""
    return str(tomlkit.key(name).as_string())
