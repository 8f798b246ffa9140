"""Names and figures in words, for messages and accounts."""

from __future__ import annotations

from collections.abc import Sequence


def some(names: Sequence[str], limit: int = 3) -> str:
    """Return the first few names, quoted, for a message.

    >>> some(["S1", "S2", "S3", "S4"])
    "'S1', 'S2', 'S3' and 1 more"
    """
    shown = ", ".join(f"'{name}'" for name in names[:limit])
    more = len(names) - limit
    return f"{shown} and {more} more" if more > 0 else shown
