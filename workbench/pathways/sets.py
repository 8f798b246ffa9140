"""Sets of features from the user's table: pathways, ontology terms, or any list with a name."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

MAXIMUM_BYTES = 256 * 2**20
"""Largest table that is read."""

SETS_HEADER = ("set", "name", "feature")
_NOTES_SHOWN = 3


@dataclass(frozen=True)
class FeatureSet:
    """One set: its id, the name to show, and the identifiers of its members."""

    id: str
    name: str
    members: frozenset[str]


@dataclass(frozen=True)
class SetTable:
    """The sets of a table, in its order, with one note for each thing that was odd about it."""

    path: str
    sets: tuple[FeatureSet, ...]
    notes: tuple[str, ...]

    @property
    def members(self) -> frozenset[str]:
        """Return every identifier that is in a set."""
        return frozenset().union(*(one.members for one in self.sets))


def read_sets(path: Path) -> SetTable:
    """Return the sets of a tab-separated table (``set``, ``name``, ``feature``; one line a member) or a .gmt file.

    A .gmt file has one line a set: its id, a description, its members, separated by tabs. Everything stays text. A
    member that comes twice counts once; a set that comes twice in a .gmt file is joined; empty lines and sets
    without members are left out; each of these is noted.

    Raises
    ------
    InputError
        The file cannot be read, is no UTF-8 text, lacks a column, has lines of another length, or holds no set.
    """
    lines = read_lines(path, MAXIMUM_BYTES)
    notes: list[str] = []
    parse = _gmt if path.suffix.lower() == ".gmt" else _rows
    found: dict[str, tuple[str, set[str]]] = {}
    for identifier, name, members in parse(path, lines, notes):
        held = found.setdefault(identifier, (name or identifier, set()))
        held[1].update(members)
    if not any(members for _, members in found.values()):
        raise InputError(
            f"{path}: holds no set with a member; a table needs the columns {', '.join(SETS_HEADER)} and a line for "
            "each member, a .gmt file a line for each set: id, description, members, separated by tabs"
        )
    empty = [identifier for identifier, (_, members) in found.items() if not members]
    if empty:
        notes.append(f"{_counted(len(empty), 'set')} without members left out: {_few(empty)}")
    sets = tuple(
        FeatureSet(one, name, frozenset(members)) for one, (name, members) in found.items() if members
    )
    return SetTable(path.name, sets, tuple(notes))


def read_lines(path: Path, maximum_bytes: int) -> list[str]:
    """Return the lines of a UTF-8 text (a byte-order mark is dropped), without their line ends."""
    try:
        with path.open("rb") as file:
            data = file.read(maximum_bytes + 1)
    except OSError as error:
        raise InputError(
            f"{path}: cannot be read: {error.strerror}; mend the path in project.toml"
        ) from error
    if len(data) > maximum_bytes:
        raise InputError(
            f"{path}: has more than {maximum_bytes} bytes, the most that is read; split the table"
        )
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise InputError(f"{path}: line {line} is not UTF-8 text; save the table as UTF-8") from error
    if "\0" in text:
        raise InputError(
            f"{path}: holds zero bytes and is no text table; save it as tab-separated UTF-8 text"
        )
    return [line.rstrip("\r") for line in text.removesuffix("\n").split("\n")]


def table_rows(
    path: Path, lines: list[str], needed: tuple[str, ...], notes: list[str], optional: tuple[str, ...] = ()
) -> Iterator[tuple[int, dict[str, str]]]:
    """Yield line number and cells of each row of a tab-separated table with a header; empty lines are noted."""
    header = [cell.strip().lower() for cell in lines[0].split("\t")]
    lacking = [name for name in needed if name not in header]
    if lacking:
        hint = (
            "; its cells seem to be separated by commas" if "," in lines[0] and "\t" not in lines[0] else ""
        )
        raise InputError(
            f"{path}: line 1 has no column {', '.join(map(repr, lacking))}; a tab-separated table with the columns "
            f"{', '.join(needed)} is needed, and it has {', '.join(filter(None, header)) or 'none'}{hint}"
        )
    twice = [name for name in (*needed, *optional) if header.count(name) > 1]
    if twice:
        raise InputError(f"{path}: line 1 has more than one column {_few(twice)}; keep one of each")
    empty = 0
    for number, line in enumerate(lines[1:], start=2):
        if not line.strip():
            empty += 1
            continue
        cells = line.split("\t")
        if len(cells) != len(header):
            raise InputError(
                f"{path}: line {number} has {len(cells)} cells and the header {len(header)}; give every line one "
                "cell for each column, separated by tabs"
            )
        yield number, {name: cell.strip() for name, cell in zip(header, cells, strict=True)}
    if empty:
        notes.append(f"{_counted(empty, 'empty line')} left out")


def _rows(path: Path, lines: list[str], notes: list[str]) -> Iterator[tuple[str, str, list[str]]]:
    """Yield the members of a table of three columns, one at a time."""
    seen: set[tuple[str, str]] = set()
    repeated = 0
    needed = ("set", "feature")
    for number, row in table_rows(path, lines, needed, notes, SETS_HEADER):
        if not row["set"]:
            raise InputError(f"{path}: line {number} names no set; give every member the set that it is in")
        repeated += (row["set"], row["feature"]) in seen
        seen.add((row["set"], row["feature"]))
        yield row["set"], row.get("name", ""), [row["feature"]] if row["feature"] else []
    if repeated:
        notes.append(f"{_counted(repeated, 'member')} named twice in one set, counted once")


def _gmt(path: Path, lines: list[str], notes: list[str]) -> Iterator[tuple[str, str, list[str]]]:
    """Yield the sets of a .gmt file."""
    seen: set[str] = set()
    joined, repeated, empty = [], 0, 0
    for number, line in enumerate(lines, start=1):
        if not line.strip():
            empty += 1
            continue
        cells = [cell.strip() for cell in line.split("\t")]
        if len(cells) < 2 or not cells[0]:
            raise InputError(
                f"{path}: line {number} has {len(cells)} field{'s' * (len(cells) != 1)}; a .gmt line needs the id of "
                "the set, a description and its members, separated by tabs"
            )
        members = [cell for cell in cells[2:] if cell]
        repeated += len(members) - len(set(members))
        if cells[0] in seen:
            joined.append(cells[0])
        seen.add(cells[0])
        yield cells[0], _gmt_name(cells[1]), members
    if empty:
        notes.append(f"{_counted(empty, 'empty line')} left out")
    if repeated:
        notes.append(f"{_counted(repeated, 'member')} named twice in one set, counted once")
    if joined:
        notes.append(f"{_counted(len(joined), 'set')} on more than one line, joined: {_few(joined)}")


def _gmt_name(description: str) -> str:
    """Return the description as a name, empty where it is a web address or a mark for nothing."""
    return "" if description.lower() in ("na", "n/a", "-") or "://" in description else description


def _few(names: Iterable[str]) -> str:
    """Return the first names in quotes."""
    listed = list(names)
    shown = ", ".join(map(repr, listed[:_NOTES_SHOWN]))
    return f"{shown} ..." if len(listed) > _NOTES_SHOWN else shown


def _counted(number: int, noun: str) -> str:
    """Return a number with its noun."""
    return f"{number} {noun}{'s' * (number != 1)}"
