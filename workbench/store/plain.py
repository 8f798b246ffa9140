"""Values as JSON knows them: numpy scalars, paths, tuples and gaps turned into plain ones."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from pathlib import PurePath
from typing import Any

import numpy as np


def plain(value: Any) -> Any:
    """Return a value made of dict, list, str, int, float, bool and None alone.

    Numbers that JSON lacks (NaN, infinities) become None; keys become text; sets are sorted.

    Raises
    ------
    TypeError
        When a value is of a type that has no plain form.

    Examples
    --------
    >>> plain({"r": np.float64(0.5), "n": (1, np.int64(2)), "q": float("nan")})
    {'r': 0.5, 'n': [1, 2], 'q': None}
    """
    if isinstance(value, np.generic):
        value = value.item()
    if value is None or isinstance(value, bool | int | str):
        return value
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, set | frozenset):
        return [plain(item) for item in sorted(value)]
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    return _less_common(value)


def _less_common(value: Any) -> Any:
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if isinstance(value, PurePath):
        return value.as_posix()
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {field.name: plain(getattr(value, field.name)) for field in dataclasses.fields(value)}
    raise TypeError(f"no JSON for a {type(value).__name__}")
