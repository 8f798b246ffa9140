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


def percent(share: float) -> str:
    """Return a share in percent, one digit after the point under 10 % unless it is whole.

    >>> percent(0.7), percent(0.1234), percent(0.0456), percent(0.05)
    ('70 %', '12 %', '4.6 %', '5 %')
    """
    figure = 100.0 * share
    return f"{figure:.0f} %" if figure >= 9.95 or abs(figure - round(figure)) < 1e-9 else f"{figure:.1f} %"
