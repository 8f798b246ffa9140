"""Hashes of what matters to a stage: a stage is stale when one of them has changed."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import h5py
import pandas as pd

from workbench.errors import DamageError


def fingerprint(value: Any) -> str:
    """Return the sha256 of a JSON-like value in one canonical spelling.

    >>> fingerprint({"a": 1, "b": [2]}) == fingerprint({"b": [2], "a": 1})
    True
    """
    text = json.dumps(value, sort_keys=True, separators=(",", ":"), default=str)
    return hashlib.sha256(text.encode()).hexdigest()


def columns_fingerprint(frame: pd.DataFrame, columns: list[str]) -> str:
    """Return the hash of some columns of the sample sheet, with the sample ids in their order."""
    cells = {column: ["" if pd.isna(cell) else str(cell) for cell in frame[column]] for column in columns}
    return fingerprint({"samples": [str(sample) for sample in frame.index], "columns": cells})


def block_header(path: Path) -> dict[str, Any]:
    """Return the account stored in a block's file without loading its values."""
    try:
        with h5py.File(path, "r") as file:
            text = file["uns/workbench"][()]
        header = json.loads(text.decode() if isinstance(text, bytes) else text)
    except (OSError, KeyError, ValueError, AttributeError) as error:
        raise DamageError(
            f"{path}: not a block file of this program ({error}); delete it and run again to rebuild it"
        ) from error
    if not isinstance(header, dict):
        raise DamageError(f"{path}: its account is damaged; delete it and run again to rebuild it")
    return header
