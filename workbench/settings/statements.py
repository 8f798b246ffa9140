"""The statements of a TOML text, each with its own bytes: what an edit does not touch stays as it is.

A statement is a table's header, a ``key = value`` (over as many lines as it takes), a comment or an empty line.
Joined again, the statements are the text.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

Path = tuple[str, ...]
"""Names of a table from the outside in: ``("blocks", "lipids")``."""

_LINE = re.compile(r"[^\n]*\n|[^\n]+")


@dataclass(frozen=True)
class Statement:
    """One statement of a TOML text.

    Attributes
    ----------
    text : str
        With its line end.
    table : tuple of str
        The table that it stands in, or opens.
    kind : {"header", "value", "comment", "empty"}
    key : str or None
        Of a value, its key (the first part of a dotted one).
    """

    text: str
    table: Path
    kind: str
    key: str | None = None


def statements(text: str) -> list[Statement]:
    r"""Return the statements of a text that is TOML.

    Examples
    --------
    >>> [s.kind for s in statements('# head\n[a.b]\nx = [\n  1,\n]\n')]
    ['comment', 'header', 'value']
    """
    found: list[Statement] = []
    table: Path = ()
    gathered = ""
    for line in _LINE.findall(text):
        gathered += line
        content = _parsed(gathered)
        if content is None:
            continue
        stripped = gathered.strip()
        if stripped.startswith("["):
            table = _path_of(content)
            found.append(Statement(gathered, table, "header"))
        elif content:
            found.append(Statement(gathered, table, "value", next(iter(content))))
        else:
            found.append(Statement(gathered, table, "comment" if stripped else "empty"))
        gathered = ""
    if gathered:
        raise ValueError(f"not a whole statement: {gathered[:60]!r}")
    return found


def _parsed(text: str) -> dict[str, Any] | None:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return None


def _path_of(content: Any) -> Path:
    """Return the names that a header's text leads through."""
    names: list[str] = []
    while content:
        if isinstance(content, list):
            content = content[0]
            continue
        name, content = next(iter(content.items()))
        names.append(name)
    return tuple(names)


def joined(found: Sequence[Statement]) -> str:
    """Return the text that statements make."""
    return "".join(statement.text for statement in found)


def table_place(found: Sequence[Statement], table: Path) -> tuple[int, int] | None:
    """Return where a table's statements begin (its header) and end; None when no header opens it.

    Comments right under the last value belong to the table; an empty line, and comments after it, do not.
    """
    headers = [i for i, s in enumerate(found) if s.kind == "header" and s.table == table]
    return (headers[0], end_of_content(found, headers[0])) if len(headers) == 1 else None


def end_of_content(found: Sequence[Statement], start: int) -> int:
    """Return the place after the last value, and the comments right under it, of the table opened at ``start``."""
    end = start + 1
    for place in range(start + 1, len(found)):
        if found[place].kind == "header":
            break
        if found[place].kind == "value":
            end = place + 1
    while end < len(found) and found[end].kind == "comment":
        end += 1
    return end
