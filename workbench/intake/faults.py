"""How faults of a delivered file are told: where each one is, how many there are, and the way out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

from workbench.errors import InputError

LISTED_FAULTS = 5
LISTED_NAMES = 10
_LONGEST_TEXT = 40


def shown(text: object) -> str:
    """Return a text in quotes as a message shows it, cut after 40 characters.

    >>> shown("2-Sep")
    "'2-Sep'"
    """
    plain = str(text)
    return repr(plain if len(plain) <= _LONGEST_TEXT else plain[: _LONGEST_TEXT - 3] + "...")


def listed(names: Sequence[object], most: int = LISTED_NAMES) -> str:
    """Return up to ``most`` names in quotes, and how many more there are.

    >>> listed(["S1", "S2", "S3"], most=2)
    "'S1', 'S2' and 1 more"
    """
    text = ", ".join(shown(name) for name in names[:most])
    return text if len(names) <= most else f"{text} and {len(names) - most} more"


def counted(number: int, noun: str, plural: str | None = None) -> str:
    """Return a number with its noun in the right form.

    >>> counted(1, "sample"), counted(3, "sample"), counted(2, "body", "bodies")
    ('1 sample', '3 samples', '2 bodies')
    """
    return f"{number:,} {noun if number == 1 else plural or noun + 's'}"


@dataclass
class Faults:
    """Faults of one kind in one file: all are counted, the first five are kept with their places.

    Parameters
    ----------
    path
        The file as the user named it.
    """

    path: Path
    total: int = 0
    kept: list[str] = field(default_factory=list)

    def add(self, text: str) -> None:
        """Count one fault, and keep its text when it is among the first five."""
        self.total += 1
        if len(self.kept) < LISTED_FAULTS:
            self.kept.append(text)

    @property
    def full(self) -> bool:
        """Whether further texts would be counted only, so that composing them can be spared."""
        return len(self.kept) >= LISTED_FAULTS

    def error(self, summary: str, way_out: str) -> InputError:
        """Return the error that tells all faults; ``summary`` says what they are, with their number."""
        return InputError(told(self.path, summary, self.kept, self.total, way_out))


def told(path: Path, summary: str, kept: Sequence[str], total: int, way_out: str) -> str:
    """Return a message: file, what is wrong, the places (one a line when several), the way out."""
    if len(kept) == 1 and total == 1:
        return f"{path}: {summary}: {kept[0]}; {way_out}"
    more = [f"  and {total - len(kept):,} more"] if total > len(kept) else []
    return "\n".join([f"{path}: {summary}:", *(f"  {text}" for text in kept), *more, way_out])
