"""Faults of the settings in plain words: file, key, what is wrong, what is allowed."""

from __future__ import annotations

import re

from pydantic import ValidationError

from workbench.settings.schema import Settings
from workbench.settings.told import key_of, told

_BARE = re.compile(r"[A-Za-z0-9_-]+")


def fault_lines(error: ValidationError, file: str) -> list[str]:
    """Return one line for each fault: ``FILE: KEY: what is wrong; allowed: ...; did you mean '...'?``."""
    return [
        f"{file}: {key_text(key_of(fault))}: {told(fault, Settings)}"
        for fault in error.errors(include_url=False)
    ]


def key_text(key: tuple[str | int, ...]) -> str:
    """Return a key as it is written in TOML, with the place in a list counted from 1.

    Examples
    --------
    >>> key_text(("samples", "exclude", "S 07"))
    'samples.exclude."S 07"'
    >>> key_text(("samples", "adjust", 0))
    'samples.adjust, item 1'
    """
    text = ""
    for part in key:
        if isinstance(part, int):
            text += f", item {part + 1}"
        else:
            quoted = (
                part if _BARE.fullmatch(part) else '"' + part.replace("\\", "\\\\").replace('"', '\\"') + '"'
            )
            text += f".{quoted}" if text else quoted
    return text or "(the whole file)"
