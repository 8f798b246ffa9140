"""The one way to read a delivered table of any format: its bytes say which reader is meant."""

from __future__ import annotations

from pathlib import Path

from workbench.errors import InputError

from .files import sniff
from .raw import RawTable
from .text_table import read_text_table


def read_delivered(path: str | Path, *, sheet: str | None = None, array: str | None = None) -> RawTable:
    """Return a delivered table with untouched ids: TSV, CSV (also .gz), XLSX, .h5ad or Parquet.

    Parameters
    ----------
    path
        The file. Its first bytes decide the format, not its name.
    sheet
        Sheet of an XLSX workbook; needed when several hold cells.
    array
        ``X`` or a layer of an .h5ad file; needed when it has several arrays.

    Raises
    ------
    InputError
        When the file cannot be read as a table; the message names file, line and column (or cell), and the
        way out.
    """
    path = Path(path)
    kind = sniff(path)
    if sheet is not None and kind != "zip":
        raise InputError(
            f"{path}: sheet '{sheet}' was named, but the file is no .xlsx workbook; leave the sheet out"
        )
    if array is not None and kind != "hdf5":
        raise InputError(
            f"{path}: array '{array}' was named, but the file is no .h5ad file; leave the array out"
        )
    if kind == "text":
        return read_text_table(path)
    if kind == "zip":
        from .xlsx import read_xlsx

        return read_xlsx(path, sheet=sheet)
    if kind == "hdf5":
        from .hdf5 import read_h5ad

        return read_h5ad(path, array=array)
    from .parquet import read_parquet

    return read_parquet(path)
