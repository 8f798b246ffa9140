"""Checks of ids: present, unique, not made into dates."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Sequence
from pathlib import Path

from .dates import is_date, suspicious_numbers
from .faults import Faults, counted, listed, shown
from .raw import RawTable


def check_present(path: Path, ids: Sequence[str], what: str, place: Callable[[int], str]) -> None:
    """Refuse empty ids; ``place`` tells where the id of a position stands.

    Raises
    ------
    InputError
        With the place of each empty id.
    """
    faults = Faults(path)
    for i, name in enumerate(ids):
        if not name.strip():
            faults.add(place(i))
    if faults.total:
        raise faults.error(
            f"{counted(faults.total, f'{what} without an id', f'{what}s without an id')}",
            "give each an id, or take the row or column out (a separator at the end of the header makes a "
            "column without a name)",
        )


def refuse_broken(raw: RawTable, what: str) -> None:
    """Refuse ids that a spreadsheet has turned into dates, booleans or errors; every one is listed.

    Raises
    ------
    InputError
        With the cell of each such id.
    """
    if raw.broken_ids:
        total = len(raw.broken_ids)
        raise Faults(raw.path, total, list(raw.broken_ids)).error(
            f"{counted(total, f'{what} id is no text', f'{what} ids are no text')}, since a spreadsheet "
            "has changed them",
            "set these cells to the text format, type the names again (SEPT2, not a date) and save; or "
            "deliver the table as TSV, straight from its source",
        )


def check_unique(path: Path, ids: Sequence[str], what: str, place: Callable[[int], str]) -> None:
    """Refuse ids that occur twice, naming each with its places.

    Raises
    ------
    InputError
        With every such id (five of them) and where it stands.
    """
    twice = {name for name, count in Counter(ids).items() if count > 1}
    if not twice:
        return
    places: dict[str, list[str]] = {}
    for i, name in enumerate(ids):
        if name in twice:
            places.setdefault(name, []).append(place(i))
    faults = Faults(path)
    for name, where in places.items():
        more = f" and {len(where) - 3} more" if len(where) > 3 else ""
        faults.add(f"{shown(name)}: {', '.join(where[:3])}{more}")
    raise faults.error(
        f"{counted(faults.total, f'{what} id occurs', f'{what} ids occur')} more than once",
        "give each its own id, or keep one of them; rows and columns are matched by id alone",
    )


def check_no_dates(path: Path, ids: Sequence[str], place: Callable[[int], str]) -> None:
    """Refuse feature ids that are dates: all of them are listed, since each must be put right by hand.

    Raises
    ------
    InputError
        With every such id and its place.
    """
    dates = [f"{shown(name)} ({place(i)})" for i, name in enumerate(ids) if is_date(name)]
    if dates:
        faults = Faults(path, total=len(dates), kept=dates)
        raise faults.error(
            f"{counted(len(dates), 'feature id is a date', 'feature ids are dates')}; a spreadsheet has "
            "changed names such as SEPT2 or MARCH1",
            "export the table again from its source without a spreadsheet between, or put the names back "
            "and save as text",
        )


def id_notes(ids: Sequence[str], what: str) -> list[str]:
    """Return warnings about ids that may be right: blanks around them, numbers where a name is expected."""
    notes = []
    blank = [name for name in ids if name != name.strip()]
    if blank:
        notes.append(
            f"{counted(len(blank), f'{what} id')} with blanks at an end, kept as they are: {listed(blank, 3)}"
        )
    odd = suspicious_numbers(ids)
    if odd:
        notes.append(
            f"{counted(len(odd), f'{what} id')} may be a date or a name that a spreadsheet made a number: "
            f"{listed(odd)}"
        )
    return notes
