"""Sheets whose columns have names: sample sheets, run sheets, tables of names."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

from .faults import Faults, counted, shown
from .ids import check_present, check_unique
from .raw import HEADER, Cell, RawTable, WrongCell, cell_text
from .readers import read_delivered


@dataclass(frozen=True)
class NamedColumns:
    """The columns of a sheet.

    Attributes
    ----------
    raw
        The table as it was read; its ids are the first column here.
    names
        Of the columns, the first one's among them; each there, each once.
    columns
        The cells of each.
    """

    raw: RawTable
    names: tuple[str, ...]
    columns: tuple[tuple[Cell, ...], ...]

    @property
    def path(self) -> Path:
        """The file."""
        return self.raw.path

    def place(self, row: int, column: int) -> str:
        """Return where a cell stands in the file."""
        return self.raw.place(row, column - 1)

    def texts(self, column: int, *, names: bool = True) -> list[str]:
        """Return the cells of a column as text, untouched.

        Parameters
        ----------
        column
            Its position.
        names
            Whether the cells are names, which are never dates; else a date is taken as its text.

        Raises
        ------
        InputError
            For cells that a spreadsheet has changed or left without a value, each with its place.
        """
        wrong = ("date", "error", "formula", "other") if names else ("error", "formula")
        cells = self.columns[column]
        faults = Faults(self.path)
        ways: dict[str, None] = {}
        for row, cell in enumerate(cells):
            if isinstance(cell, WrongCell) and cell.kind in wrong:
                faults.add(f"{self.place(row, column)} (column {shown(self.names[column])}) holds {cell}")
                ways[cell.way_out] = None
        if faults.total:
            raise faults.error(f"{counted(faults.total, 'cell has', 'cells have')} no text", "; ".join(ways))
        return [cell_text(cell) for cell in cells]


def read_columns(
    path: str | Path, what: str, first: Sequence[str] = ("row",), sheet: str | None = None
) -> NamedColumns:
    """Return the columns of a TSV, CSV or XLSX file.

    Parameters
    ----------
    path
        The file.
    what
        What the file is, for messages: ``sample sheet``.
    first
        Names for a first column that has none; the first of them that no other column has.
    sheet
        Sheet of a workbook.

    Raises
    ------
    InputError
        For ragged lines, columns without a name or with the same name, with file, line and column.
    """
    path = Path(path)
    raw = read_delivered(path, sheet=sheet)
    if raw.form not in ("tsv", "csv", "xlsx"):
        raise InputError(f"{path}: a {what} is TSV, CSV or XLSX, not {raw.form}; save it as one of these")
    corner = raw.corner if raw.corner.strip() else next((n for n in first if n not in raw.columns), "")
    if raw.corner_lacks and not corner:
        raise InputError(
            f"{path}: line 1: the header is one field short, and has a column {shown(first[0])}, so the cells may "
            "stand one column off; give every column its name"
        )
    names = (corner, *raw.columns)
    check_present(path, names, "column", lambda j: raw.place(HEADER, j - 1))
    check_unique(path, names, "column", lambda j: raw.place(HEADER, j - 1))
    rows = [[raw.rows[i], *raw.body.row(i)] for i in range(len(raw.rows))]
    return NamedColumns(raw, names, tuple(zip(*rows, strict=True)))
