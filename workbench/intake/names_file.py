"""The table of accepted names: written by a command, edited by a person, read and checked here."""

from __future__ import annotations

from collections.abc import Collection, Iterable
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

from .columns import NamedColumns, read_columns
from .faults import Faults, counted, listed, shown

_COLUMNS = ("delivered", "sample")
_WAY_OUT = "mend the table of names, or take the rows out"


@dataclass(frozen=True)
class AcceptedName:
    """One row of a table of names: a delivered name, what it stands for, and where that is written."""

    delivered: str
    target: str
    place: str


@dataclass(frozen=True)
class AcceptedNames:
    """A table of names.

    Attributes
    ----------
    path
        The file.
    rows
        In its order.
    """

    path: Path
    rows: tuple[AcceptedName, ...]

    def of(self, targets: Collection[str], what: str) -> dict[str, str]:
        """Return delivered name to target for the rows that speak of these targets.

        Parameters
        ----------
        targets
            Ids of the sample sheet, or of the run sheet.
        what
            What a target is, for messages: ``sample``.

        Raises
        ------
        InputError
            When a delivered name or a target stands twice, or a target's own name is said to be another.
        """
        known = set(targets)
        rows = [row for row in self.rows if row.target in known]
        self._refuse(
            [
                (row, f"{shown(row.delivered)} is a {what} itself, and is said to be {shown(row.target)}")
                for row in rows
                if row.delivered in known and row.delivered != row.target
            ],
            f"of {what}s; rows that were exchanged are told in project.toml: swap",
        )
        self._refuse(_twice(rows, "delivered") or _twice(rows, "target"), "not one to one")
        return {row.delivered: row.target for row in rows}

    def check_targets(self, *targets: Collection[str]) -> None:
        """Refuse rows whose target is none of these.

        Raises
        ------
        InputError
            With the line of each.
        """
        known = {name for some in targets for name in some}
        self._refuse(
            [(row, f"{shown(row.target)} is not known") for row in self.rows if row.target not in known],
            "for names that neither the sample sheet nor the run sheet has",
        )

    def _refuse(self, wrong: list[tuple[AcceptedName, str]], summary: str) -> None:
        faults = Faults(self.path)
        for row, told in wrong:
            faults.add(f"{row.place}: {told}")
        if faults.total:
            raise faults.error(f"{counted(faults.total, 'row is', 'rows are')} {summary}", _WAY_OUT)


def _twice(rows: Iterable[AcceptedName], key: str) -> list[tuple[AcceptedName, str]]:
    first: dict[str, AcceptedName] = {}
    wrong = []
    for row in rows:
        name = getattr(row, key)
        if name in first:
            wrong.append((row, f"{shown(name)} stands in {first[name].place} as well"))
        first.setdefault(name, row)
    return wrong


def read_names(path: str | Path) -> AcceptedNames:
    """Return a table of names: columns ``delivered`` and ``sample``; others are left alone.

    A table without rows holds no names, and is no fault. Names are taken as they are written.

    Raises
    ------
    InputError
        When it lacks a column or a cell is empty.
    """
    path = Path(path)
    if _is_header_only(path):
        return AcceptedNames(path, ())
    found = read_columns(path, "table of names")
    lacking = [name for name in _COLUMNS if name not in found.names]
    if lacking:
        raise InputError(
            f"{path}: a table of names has the columns 'delivered' and 'sample'; it lacks {listed(lacking)} and "
            f"has {listed(found.names)}"
        )
    delivered, target = (found.texts(found.names.index(name)) for name in _COLUMNS)
    _check_filled(found, delivered, target)
    place = found.names.index("delivered")
    return AcceptedNames(
        path,
        tuple(
            AcceptedName(one, other, found.place(row, place))
            for row, (one, other) in enumerate(zip(delivered, target, strict=True))
        ),
    )


def _is_header_only(path: Path) -> bool:
    try:
        text = path.read_bytes()[:4096].decode("utf-8-sig").rstrip("\r\n")
    except (OSError, UnicodeDecodeError):
        return False
    return "\n" not in text and set(_COLUMNS) <= set(text.replace(",", "\t").split("\t"))


def _check_filled(found: NamedColumns, *columns: list[str]) -> None:
    faults = Faults(found.path)
    for name, cells in zip(_COLUMNS, columns, strict=True):
        for row, cell in enumerate(cells):
            if not cell.strip():
                faults.add(f"{found.place(row, found.names.index(name))} (column {shown(name)})")
    if faults.total:
        raise faults.error(f"{counted(faults.total, 'cell is', 'cells are')} empty", _WAY_OUT)
