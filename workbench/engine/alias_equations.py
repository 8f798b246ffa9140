"""The equation by which a column of the design is told by others, so that a person sees why it cannot be parted."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import Nuisance, check_named

FloatArray = NDArray[np.float64]

NO_PART = 1e-7
LARGEST_DENOMINATOR = 12


def alias_equations(columns: FloatArray, names: Sequence[str]) -> tuple[str, ...]:
    """Return, for each column in the span of the intercept and the columns before it, that combination as a sum.

    Parameters
    ----------
    columns : ndarray of shape (n_samples, n_columns)
        Classes as indicators.
    names : sequence of str
        One name per column, such as ``batch=b2`` for an indicator.

    Raises
    ------
    NumericsError
        When names and columns differ in number, or values are not finite.

    Examples
    --------
    Every treated sample was run on the second day:

    >>> treated = np.array([0.0, 0.0, 1.0, 1.0])
    >>> alias_equations(np.column_stack([treated, 1.0 - treated]), ["day=2", "group=control"])
    ("'group=control' = 1 - 'day=2'",)
    """
    columns = check_named(columns, names)
    kept = Nuisance.of(columns, len(columns)).kept
    found = []
    for j in sorted(set(range(len(names))) - set(kept.tolist())):
        before = [int(k) for k in kept if k < j]
        known = np.column_stack([np.ones(len(columns)), columns[:, before]])
        parts: FloatArray = np.asarray(np.linalg.lstsq(known, columns[:, j], rcond=None)[0], dtype=np.float64)
        sizes = np.abs(parts) * np.abs(known).max(axis=0)
        parts[sizes <= NO_PART * max(float(np.abs(columns[:, j]).max()), NO_PART)] = 0.0
        found.append(f"'{names[j]}' = {_sum(parts, ['', *(names[k] for k in before)])}")
    return tuple(found)


def _sum(parts: FloatArray, names: Sequence[str]) -> str:
    """Return a sum in words; the part without a name is a number.

    >>> _sum(np.array([1.0, -1.0, 0.5]), ["", "a", "b"])
    "1 - 'a' + 1/2 'b'"
    """
    told = ""
    for part, name in zip(parts, names, strict=True):
        if not part:
            continue
        size = _figure(abs(float(part)))
        term = size if not name else f"'{name}'" if size == "1" else f"{size} '{name}'"
        sign = "-" if part < 0 else "+"
        told += f" {sign} {term}" if told else f"{'-' if part < 0 else ''}{term}"
    return told or "0"


def _figure(size: float) -> str:
    """Return a number as the fraction that it is, or in four digits.

    >>> _figure(0.5), _figure(2.0), _figure(0.1234567)
    ('1/2', '2', '0.1235')
    """
    near = Fraction(size).limit_denominator(LARGEST_DENOMINATOR)
    return str(near) if near and abs(float(near) - size) <= NO_PART * size else f"{size:.4g}"
