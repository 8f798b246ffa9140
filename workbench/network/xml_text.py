"""Any text and any column name made legal for XML, so that the text can be had back."""

from __future__ import annotations

import re
from collections.abc import Iterable

RESERVED_NAMES = frozenset({"id", "key", "self", "node_for_adding", "node_default", "edge_default"})
"""Names that common readers of GraphML give a meaning of their own (common practice)."""

_LEGAL = "\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff"
_TO_ESCAPE = re.compile(rf"[^{_LEGAL}]|\\(?=u[0-9a-fA-F]{{4}})")
_ESCAPED = re.compile(r"\\u([0-9a-fA-F]{4})")
_NOT_IN_NAME = re.compile(r"[^A-Za-z0-9_.-]")


def legal_text(text: str) -> str:
    r"""Return ``text`` with each character that XML forbids written as ``\uXXXX``.

    Legal are tab, newline, carriage return, U+0020 to U+D7FF, U+E000 to U+FFFD and everything above U+FFFF
    (Extensible Markup Language 1.0, fifth edition, production 2). A backslash that already stands before
    ``uXXXX`` is itself written as ``\u005c``, so that :func:`restore_text` gives back every text.

    Examples
    --------
    >>> legal_text("bell \x07"), legal_text("<b> & 'quoted'")
    ('bell \\u0007', "<b> & 'quoted'")
    >>> restore_text(legal_text("a \\u0041 b \x00")) == "a \\u0041 b \x00"
    True
    """
    return _TO_ESCAPE.sub(lambda found: f"\\u{ord(found[0]):04x}", text)


def restore_text(text: str) -> str:
    """Return the text that :func:`legal_text` was given."""
    return _ESCAPED.sub(lambda found: chr(int(found[1], 16)), text)


def legal_names(names: Iterable[str]) -> dict[str, str]:
    """Return for each name one of ``[A-Za-z_][A-Za-z0-9_.-]*``, all different, legal ones kept.

    Examples
    --------
    >>> legal_names(["kegg", "HMDB ID", "HMDB_ID", "id"])
    {'kegg': 'kegg', 'HMDB ID': 'HMDB_ID_2', 'HMDB_ID': 'HMDB_ID', 'id': 'id_'}
    """
    names = list(names)
    taken = {name for name in names if name == _legal_name(name)}
    given = {name: name for name in taken}
    for name in names:
        if name not in given:
            given[name] = _free(_legal_name(name), taken)
            taken.add(given[name])
    return {name: given[name] for name in names}


def _legal_name(name: str) -> str:
    """Return the nearest legal name, not yet looking for a second one of its kind."""
    name = _NOT_IN_NAME.sub("_", name)
    if not re.match(r"[A-Za-z_]", name):
        name = f"_{name}"
    return f"{name}_" if name in RESERVED_NAMES else name


def _free(name: str, taken: set[str]) -> str:
    """Return ``name``, or with the first number from 2 that makes it new."""
    if name not in taken:
        return name
    number = 2
    while f"{name}_{number}" in taken:
        number += 1
    return f"{name}_{number}"
