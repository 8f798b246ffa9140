"""Numbers of one line of text, read at once where the line holds nothing but numbers and missing tokens."""

from __future__ import annotations

import numpy as np

_EXACT_WHOLE = 2**53
_OTHER_TOKENS = ("N/A", "#N/A", "null", "NULL", "-", ".")


def quick_numbers(text: str, separator: str, n: int) -> np.ndarray | None:
    """Return the ``n`` numbers of a line as float64, missing tokens as NaN, or None.

    None means that each cell must be looked at: there is something else in the line. What is returned is
    exact: numpy reads digits as Python's ``float`` does, and whole numbers beyond 2^53 are read as floats.

    >>> quick_numbers("1,2.5,NA,", ",", 4)
    array([1. , 2.5, nan, nan])
    >>> quick_numbers("1,2 3,<LOD", ",", 3) is None
    True
    """
    if not text.isascii() or " " in text or "_" in text or "(" in text or "\v" in text or "\f" in text:
        return None  # numpy reads these more widely: "1 2" as two numbers, "nan(1)" as one
    if "." not in text and "-" not in text:
        gaps = "NA" in text
        whole = _read(text.replace("NA", "-1") if gaps else text, separator, n, np.int64)
        if whole is None:
            gaps, whole = True, _read(_filled(text, separator, "-1"), separator, n, np.int64)
        # Only "NA" as a whole field becomes -1: "NA1" becomes -11.
        if whole is not None and whole.min() >= -1 and whole.max() < _EXACT_WHOLE:
            return np.where(whole < 0, np.nan, whole) if gaps else whole
    numbers = _read(text, separator, n, np.float64)
    if numbers is None:
        numbers = _read(_filled(text, separator, "nan"), separator, n, np.float64)
    if numbers is None:
        return _read(_filled(text, separator, "nan", _OTHER_TOKENS), separator, n, np.float64)
    return numbers


def _read(text: str, separator: str, n: int, dtype: type) -> np.ndarray | None:
    """Return the numbers when there are ``n``, each field one; a field that is none ends the reading."""
    try:
        numbers: np.ndarray = np.fromstring(text, dtype=dtype, sep=separator)
    except (DeprecationWarning, ValueError):
        return None
    return numbers if len(numbers) == n else None


def _filled(text: str, separator: str, gap: str, tokens: tuple[str, ...] = ()) -> str:
    """Return a line with ``gap`` in place of empty fields, ``NA`` and further tokens."""
    line = f"{separator}{text}{separator}"
    for token in ("NA", "", *tokens):
        field, filled = f"{separator}{token}{separator}", f"{separator}{gap}{separator}"
        if field in line:
            line = line.replace(field, filled).replace(field, filled)  # twice: neighbours share a separator
    return line[1:-1]
