"""What still holds of a ``project.toml`` with faults, so that faults of other kinds can be told in the same go."""

from __future__ import annotations

import copy
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from workbench.errors import SettingsError
from workbench.settings.load import parse_toml, read_settings_text
from workbench.settings.schema import Settings
from workbench.settings.told import Key, key_of

MOST_ROUNDS = 5
DEPENDENT = ("samples.kinds", "samples.order", "analyses.")
"""Beginnings of keys whose faults may only follow from an entry that was left out here."""


def salvaged_settings(path: Path) -> Settings | None:
    """Return the settings without the entries that are at fault; None when nothing can be told from the rest.

    A key that is unknown or wrong is left out, a table that lacks one as a whole. The name of the id column must
    be right, since without it no sample sheet can be read.
    """
    try:
        data = parse_toml(read_settings_text(path), path)
    except SettingsError:
        return None
    for _ in range(MOST_ROUNDS):
        try:
            return Settings.model_validate(data)
        except ValidationError as error:
            keys = {_at_fault(key_of(fault), fault["type"]) for fault in error.errors(include_url=False)}
            if () in keys or ("samples", "id") in keys:
                return None
            data = _without(data, keys)
    return None


def independent(faults: Iterable[str]) -> list[str]:
    """Return the faults that do not follow from entries which were left out.

    >>> independent(["project.toml: samples.group: x", "project.toml: analyses.main.blocks: y"])
    ['project.toml: samples.group: x']
    """
    return [fault for fault in faults if not fault.split(": ", 2)[1].startswith(DEPENDENT)]


def _at_fault(key: Key, kind: str) -> Key:
    return key[:-1] if kind == "missing" else key


def _without(data: dict[str, Any], keys: Iterable[Key]) -> dict[str, Any]:
    """Return the tables without some entries; of a list with a wrong item nothing is kept."""
    left = copy.deepcopy(data)
    for key in keys:
        here: Any = left
        for part in key[:-1]:
            if not isinstance(here, dict) or not isinstance(here.get(str(part)), dict):
                here.pop(str(part), None) if isinstance(here, dict) else None
                break
            here = here[str(part)]
        else:
            here.pop(str(key[-1]), None)
    return left
