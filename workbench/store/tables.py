"""Tables and records of results as text: equal bytes for equal content."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Collection
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from workbench.errors import DamageError, InputError
from workbench.store.plain import plain

DIGITS = 9
"""Significant digits of a number in a table: more than the 1e-6 to which machines agree."""

_OURS = """feature sample block layer label source source_block target target_block basis support known
shared_sets part goes_with top_features analysis group subject set name reason"""
_IDENTIFIERS = "ensembl entrez symbol kegg hmdb chebi uniprot pubchem inchikey lipidmaps"

TEXT_COLUMNS = frozenset(f"{_OURS} {_IDENTIFIERS}".split())
"""Columns that are read as text whatever stands in them: an identifier like 7157 or 1e5 is no number."""

_BREAKS = re.compile(r"[\t\r\n\v\f\x1c-\x1e\x85\u2028\u2029\0]")
_WHOLE = re.compile(r"-?(0|[1-9][0-9]{0,17})")
_NUMBER = re.compile(r"-?(0|[1-9][0-9]*)(\.[0-9]+)?(e[+-][0-9]{2,3})?|-?inf")


def table_bytes(frame: pd.DataFrame) -> bytes:
    r"""Return a table as tab-separated UTF-8 text with a header; the index is not written.

    Numbers have 9 significant digits, without a negative zero; missing cells are empty; true and false are
    words; a tab or a line break inside a text becomes a space. Nothing is quoted.

    Raises
    ------
    InputError
        When two columns have one name, or there is none.

    Examples
    --------
    >>> cells = {"feature": ["a\tb", None], "r": [1 / 3, float("nan")], "tested": [True, False]}
    >>> table_bytes(pd.DataFrame(cells))
    b'feature\tr\ttested\na b\t0.333333333\ttrue\n\t\tfalse\n'
    """
    names = [_clean(str(name)) for name in frame.columns]
    repeated = sorted({name for name in names if names.count(name) > 1})
    if repeated:
        raise InputError(f"a table has two columns of one name: {', '.join(map(repr, repeated))}; rename one")
    if not names:
        raise InputError("a table needs a column, got none")
    columns = [_cells(frame.iloc[:, place]) for place in range(len(names))]
    lines = ["\t".join(names), *("\t".join(row) for row in zip(*columns, strict=True))]
    return ("\n".join(lines) + "\n").encode("utf-8", "replace")


def _cells(column: pd.Series[Any]) -> list[str]:
    if isinstance(column.dtype, np.dtype) and column.dtype.kind == "f":
        return [_number(value) for value in column.tolist()]
    return [_cell(value) for value in column.astype(object).tolist()]


def _number(value: float) -> str:
    if math.isnan(value):
        return ""
    text = format(value, f".{DIGITS}g")
    return "0" if text == "-0" else text


def _cell(value: Any) -> str:
    if value is None or value is pd.NA or value is pd.NaT:
        return ""
    if isinstance(value, bool | np.bool_):
        return "true" if value else "false"
    if isinstance(value, float | np.floating):
        return _number(float(value))
    return _clean(str(value))


def _clean(text: str) -> str:
    return _BREAKS.sub(" ", text)


def read_table(path: Path, *, text: Collection[str] = ()) -> pd.DataFrame:
    """Return a table that `table_bytes` wrote.

    A column is numbers when every filled cell is written as `table_bytes` writes numbers (``0012`` and
    ``1e5`` are not), whole numbers when no cell has a point or is missing, true/false when every cell is;
    it is text when it is named in `TEXT_COLUMNS` or ``text``, or otherwise. Missing numbers are NaN,
    missing text is empty.

    Parameters
    ----------
    path : Path
    text : collection of str, optional
        More columns that are text.

    Raises
    ------
    InputError
        When there is no such file.
    DamageError
        When it is not a table: not UTF-8, no header, lines of unequal length.
    """
    try:
        content = path.read_bytes().decode()
    except FileNotFoundError as error:
        raise InputError(f"{path}: is missing; run `workbench run` to make it") from error
    except (OSError, UnicodeDecodeError) as error:
        raise DamageError(
            f"{path}: cannot be read as UTF-8 text; delete it and run `workbench run`"
        ) from error
    rows = [line.split("\t") for line in content.removesuffix("\n").split("\n")]
    header = rows.pop(0)
    _check_rows(path, header, rows)
    columns = list(zip(*rows, strict=True)) if rows else [() for _ in header]
    known = TEXT_COLUMNS | set(text)
    return pd.DataFrame(
        {name: _typed(cells, name in known) for name, cells in zip(header, columns, strict=True)},
        columns=pd.Index(header, dtype=object),
    )


def _check_rows(path: Path, header: list[str], rows: list[list[str]]) -> None:
    if header == [""] or len(set(header)) != len(header):
        raise DamageError(
            f"{path}: line 1 is not a header of different names; delete it and run `workbench run`"
        )
    for number, row in enumerate(rows, start=2):
        if len(row) != len(header):
            raise DamageError(
                f"{path}: line {number} has {len(row)} cells, the header {len(header)}; "
                f"delete the file and run `workbench run`"
            )


def _typed(cells: tuple[str, ...], is_text: bool) -> np.ndarray[Any, Any]:
    if is_text:
        return np.array(cells, dtype=object)
    if cells and all(cell in ("true", "false") for cell in cells):
        return np.array([cell == "true" for cell in cells], dtype=bool)
    if cells and all(_WHOLE.fullmatch(cell) and cell != "-0" for cell in cells):
        return np.array([int(cell) for cell in cells], dtype=np.int64)
    if all(not cell or _NUMBER.fullmatch(cell) for cell in cells):
        return np.array([float(cell) if cell else np.nan for cell in cells], dtype=np.float64)
    return np.array(cells, dtype=object)


def json_bytes(value: Any) -> bytes:
    r"""Return a record as JSON: sorted keys, indented, UTF-8; numbers that JSON lacks become null.

    Examples
    --------
    >>> json_bytes({"b": float("nan"), "a": (1, 2)})
    b'{\n "a": [\n  1,\n  2\n ],\n "b": null\n}\n'
    """
    text = json.dumps(plain(value), indent=1, sort_keys=True, ensure_ascii=False)
    return (text + "\n").encode("utf-8", "backslashreplace")
