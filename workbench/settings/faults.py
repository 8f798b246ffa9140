"""Faults of the settings in plain words: file, key, what is wrong, what is allowed."""

from __future__ import annotations

from pydantic import ValidationError

from workbench.settings.schema import Settings
from workbench.settings.told import key_of, key_text, told

__all__ = ["fault_lines", "key_text"]


def fault_lines(error: ValidationError, file: str) -> list[str]:
    """Return one line for each fault: ``FILE: KEY: what is wrong; allowed: ...; did you mean '...'?``."""
    return [
        f"{file}: {key_text(key_of(fault))}: {told(fault, Settings)}"
        for fault in error.errors(include_url=False)
    ]
