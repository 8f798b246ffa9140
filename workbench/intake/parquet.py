"""Reading Parquet through the optional pyarrow: the first column (or the stored index) holds the ids."""

from __future__ import annotations

import datetime
import json
from pathlib import Path
from typing import Any

import numpy as np

from workbench.errors import InputError

from .faults import counted, listed, shown
from .raw import HEADER, ArrayBody, Body, Cell, CellBody, RawTable, WrongCell

LARGEST_TABLE = 8 * 2**30


def read_parquet(path: Path) -> RawTable:
    """Return a Parquet table as a `RawTable`; nulls and NaN are missing cells.

    The id column is the index that pandas stored, when it is one column, else the first column; it must hold
    text or whole numbers.

    Raises
    ------
    InputError
        When pyarrow is not installed, the file is damaged or too large, or the ids are neither text nor whole
        numbers.
    """
    try:
        from pyarrow import parquet  # type: ignore[import-untyped]
    except ImportError:
        raise InputError(
            f"{path}: reading Parquet needs pyarrow, which is not installed; install the 'parquet' extra, "
            "or deliver TSV"
        ) from None
    try:
        with parquet.ParquetFile(path) as file:
            _check_size(path, file.metadata)
            return _raw_table(path, file.read())
    except (OSError, ValueError, TypeError, LookupError, MemoryError, RuntimeError, ArithmeticError):
        raise InputError(f"{path}: the Parquet file is damaged or cut short; fetch it again") from None


def _check_size(path: Path, metadata: Any) -> None:
    cells = metadata.num_rows * metadata.num_columns
    if cells * 8 > LARGEST_TABLE:
        raise InputError(
            f"{path}: declares {cells:,} cells, more than {LARGEST_TABLE // 2**30} GB; deliver a smaller table"
        )


def _raw_table(path: Path, table: Any) -> RawTable:
    repeated = sorted({name for name in table.column_names if table.column_names.count(name) > 1})
    if repeated:
        raise InputError(
            f"{path}: column names that occur twice: {listed(repeated)}; give every column its own name"
        )
    name = _id_column(table)
    rows = _ids(path, name, table.column(name)) if name in table.column_names else ()
    names = [column for column in table.column_names if column != name]
    if not names or not rows:
        raise InputError(
            f"{path}: the table is empty: {counted(len(rows), 'row')}, and {counted(len(names), 'column')} "
            "beside the ids"
        )
    return RawTable(
        path=path,
        form="parquet",
        corner="" if name.startswith("__index_level_") else name,
        columns=tuple(names),
        rows=rows,
        body=_body(table, names),
        notes=(f"{path.name}: ids taken from column {shown(name)}",),
    )


def _id_column(table: Any) -> str:
    """Return the one column that pandas stored as the index, else the first one."""
    try:
        stored = json.loads((table.schema.metadata or {})[b"pandas"])["index_columns"]
        named = [name for name in stored if name in table.column_names]
    except (KeyError, TypeError, ValueError):
        named = []
    return str(named[0] if len(named) == 1 else next(iter(table.column_names), ""))


def _ids(path: Path, name: str, column: Any) -> tuple[str, ...]:
    cells = column.to_pylist()
    wrong = next(
        (i for i, c in enumerate(cells) if isinstance(c, bool) or not isinstance(c, str | int)), None
    )
    if wrong is not None:
        raise InputError(
            f"{path}: row {wrong + 1}, column {shown(name)}: the id is {shown(cells[wrong])}, neither text "
            "nor a whole number; put the ids as text into the first column"
        )
    return tuple(map(str, cells))


def _body(table: Any, names: list[str]) -> Body:
    from pyarrow import types

    kinds = [table.schema.field(name).type for name in names]
    if all(types.is_integer(kind) or types.is_floating(kind) for kind in kinds):
        columns = [table.column(name).to_numpy().astype(np.float64) for name in names]
        return ArrayBody(np.column_stack(columns))
    cells = [[_cell(c) for c in table.column(name).to_pylist()] for name in names]
    return CellBody(list(zip(*cells, strict=True)), len(names), _place)


def _cell(value: Any) -> Cell:
    if isinstance(value, bool):
        return WrongCell("boolean", str(value).upper())
    if value is None or isinstance(value, str | int | float):
        return value
    dated = isinstance(value, datetime.date | datetime.time | datetime.timedelta)
    return WrongCell("date" if dated else "other", str(value))


def _place(i: int, j: int) -> str:
    """Return the row and column, both counted from 1 with the ids as the first column."""
    row, column = f"row {i + 1}", f"column {j + 2}"
    return column if i == HEADER else row if j < 0 else f"{row}, {column}"
