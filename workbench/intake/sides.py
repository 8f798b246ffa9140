"""Names that one of two lists has alone."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from .faults import listed


@dataclass(frozen=True)
class Sides:
    """Names of one kind that one side alone has, and how many both have.

    Attributes
    ----------
    gained, lost
        Names that the new side alone has, and the old one alone, each in its own order.
    kept
        Number of names of both.
    """

    gained: tuple[str, ...]
    lost: tuple[str, ...]
    kept: int

    def line(self, noun: str) -> str:
        """Return a sentence: ``samples: 2 gained ('S7', 'S8'), 1 lost ('S1'), 40 kept``."""
        parts = [
            f"{len(names):,} {what} ({listed(names, 5)})"
            for names, what in ((self.gained, "gained"), (self.lost, "lost"))
            if names
        ]
        return f"{noun}s: {', '.join([*parts, f'{self.kept:,} kept'])}"

    @property
    def same(self) -> bool:
        """Whether both sides have the same names."""
        return not (self.gained or self.lost)


def sides(old: Sequence[Any], new: Sequence[Any]) -> Sides:
    """Return what each of two lists of names has alone."""
    before, after = list(map(str, old)), list(map(str, new))
    here, there = set(before), set(after)
    return Sides(
        tuple(name for name in after if name not in here),
        tuple(name for name in before if name not in there),
        len(here & there),
    )
