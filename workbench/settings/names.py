"""Names that become keys, file names and folders: blocks and analyses."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable

from workbench.errors import InputError

RESERVED = ("check", "look", "compare")
"""Folders below ``results/`` that are not an analysis's."""

LONGEST_NAME = 64
"""Characters of a name: it has to fit into a file name with room for a suffix."""

_NAME = re.compile(r"[A-Za-z0-9_][A-Za-z0-9_-]*")


def name_fault(name: str) -> str | None:
    """Return what is wrong with the name of a block or an analysis; None when nothing is.

    Examples
    --------
    >>> name_fault("lipids_pos") is None
    True
    >>> name_fault("../etc")
    "'../etc' is not a name; allowed: letters, digits, '_' and '-', not first a '-'"
    """
    if not _NAME.fullmatch(name):
        return f"{name!r} is not a name; allowed: letters, digits, '_' and '-', not first a '-'"
    if len(name) > LONGEST_NAME:
        return f"{name!r} has {len(name)} characters; allowed: at most {LONGEST_NAME}"
    if name.lower() in RESERVED:
        return f"{name!r} is reserved; allowed: any name but {', '.join(map(repr, RESERVED))}"
    return None


def check_name(name: str, what: str) -> str:
    """Return the name of a block or an analysis when it may be one.

    Parameters
    ----------
    name : str
        Letters, digits, ``_`` and ``-``; not first a ``-``; none of the reserved words.
    what : str
        What is being named, for the message: ``"block"``, ``"analysis"``.

    Raises
    ------
    InputError
        When the name is not allowed.

    Examples
    --------
    >>> check_name("metabolites", "block")
    'metabolites'
    """
    fault = name_fault(name)
    if fault is not None:
        raise InputError(f"name of the {what}: {fault}")
    return name


def nearest(word: str, allowed: Iterable[str]) -> str | None:
    """Return the allowed spelling that is most like the word; None when none is like it.

    Case is looked through first; then the share of matching characters has to reach 0.6
    (``difflib.get_close_matches``).

    Examples
    --------
    >>> nearest("annotation", ["adjust", "annotations", "array"])
    'annotations'
    >>> nearest("zebra", ["adjust", "array"]) is None
    True
    """
    known = list(dict.fromkeys(allowed))
    for candidate in known:
        if candidate.lower() == word.lower():
            return candidate
    close = difflib.get_close_matches(word, known, n=1, cutoff=0.6)
    return close[0] if close else None


def hint(word: str, allowed: Iterable[str]) -> str:
    """Return ``"; did you mean 'X'?"``, or an empty text when nothing allowed is like the word.

    Examples
    --------
    >>> hint("Group", ["group", "id"])
    "; did you mean 'group'?"
    """
    guess = nearest(word, allowed)
    return "" if guess is None else f"; did you mean {guess!r}?"
