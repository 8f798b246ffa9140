"""The form in which a block is stored: what HDF5 and anndata cannot hold is turned into what they can.

Numbers stay numbers, true/false stays true/false where nothing is missing, all else becomes text (empty where
missing). Column names that HDF5 reads as a path or that anndata reserves are changed, and the names as they
were are kept in ``uns`` beside the block, so that `restored` gives them back.
"""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from datetime import date, datetime, time
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from workbench.errors import InputError

if TYPE_CHECKING:
    import anndata as ad

NAMES_KEY = "workbench_columns"
"""Entry of ``uns`` with the column names as they were, where they had to be changed."""

RUN_SHEET, RUN_VALUES = "run_sheet", "run_values"
"""Entries of ``uns`` that are no texts: a table with a row for each assay run, and the runs' values."""

_RESERVED = ("", ".", "..", "_index")


def stored_form(adata: ad.AnnData) -> ad.AnnData:
    """Return a block as it is stored; the given one is not changed.

    Parameters
    ----------
    adata : AnnData
        ``X`` of shape (n_samples, n_features), numbers; ``layers`` of that shape, numbers or true/false;
        ``uns`` of texts, and of ``run_sheet`` (a table of runs) with ``run_values`` (n_runs, n_features).
        Nothing else is stored.

    Returns
    -------
    AnnData
        ``X`` and numeric layers float64, bool layers bool, columns of ``obs`` and ``var`` float64, int64,
        bool or text.

    Raises
    ------
    InputError
        When names are missing or not unique, the block is empty, or it holds what is not stored.
    """
    import anndata as ad  # takes a second to load: not for commands that read no block

    _check_parts(adata)
    names: dict[str, dict[str, str]] = {}
    frames = {}
    for axis, frame, what in (("obs", adata.obs, "sample"), ("var", adata.var, "feature")):
        frames[axis], names[axis] = _stored_frame(frame, what)
    own = (NAMES_KEY, RUN_SHEET, RUN_VALUES)
    uns: dict[str, Any] = {
        str(key): _uns_text(key, value) for key, value in adata.uns.items() if key not in own
    }
    if RUN_SHEET in adata.uns or RUN_VALUES in adata.uns:
        uns[RUN_SHEET], names[RUN_SHEET], uns[RUN_VALUES] = _stored_runs(adata)
    changed = {axis: renamed for axis, renamed in names.items() if renamed}
    if changed:
        uns[NAMES_KEY] = json.dumps(changed, sort_keys=True)
    layers = {str(name): _matrix(layer, f"layer {name!r}") for name, layer in adata.layers.items()}
    return ad.AnnData(X=_matrix(adata.X, "X", np.float64), layers=layers, uns=uns, **frames)


def restored(adata: ad.AnnData) -> ad.AnnData:
    """Return a stored block with its column names as they were before it was stored.

    Raises
    ------
    ValueError
        When the names kept beside the block are not names.
    """
    kept = json.loads(adata.uns.pop(NAMES_KEY, "{}"))
    for axis in ("obs", "var"):
        setattr(adata, axis, _with_names(getattr(adata, axis), kept.get(axis, {})))
    if RUN_SHEET in adata.uns:
        adata.uns[RUN_SHEET] = _with_names(adata.uns[RUN_SHEET], kept.get(RUN_SHEET, {}))
    return adata


def _with_names(frame: pd.DataFrame, renamed: Mapping[str, str]) -> pd.DataFrame:
    if not all(isinstance(name, str) for name in renamed.values()):
        raise ValueError("names of columns are not texts")
    frame = frame.rename(columns=renamed)
    frame.index.name = renamed.get(str(frame.index.name), frame.index.name)
    return frame


def _stored_runs(adata: ad.AnnData) -> tuple[pd.DataFrame, dict[str, str], np.ndarray[Any, Any]]:
    """Return the runs' table as it is stored, the names that were changed in it, and the runs' values."""
    sheet, values = adata.uns.get(RUN_SHEET), adata.uns.get(RUN_VALUES)
    if not isinstance(sheet, pd.DataFrame) or values is None:
        raise InputError(
            f"uns[{RUN_SHEET!r}] of a block must be a table of runs, and uns[{RUN_VALUES!r}] stands beside it; "
            f"got {type(sheet).__name__} and {type(values).__name__}"
        )
    matrix = _matrix(values, f"uns[{RUN_VALUES!r}]", np.float64)
    if matrix.shape != (len(sheet), adata.n_vars) or not len(sheet):
        raise InputError(
            f"uns[{RUN_VALUES!r}] of a block must have a row for each of {len(sheet)} runs and a column for each "
            f"of {adata.n_vars} features, got {matrix.shape[0]} x {matrix.shape[1]}"
        )
    stored, names = _stored_frame(sheet, "run")
    return stored, names, matrix


def _check_parts(adata: ad.AnnData) -> None:
    for part in ("obsm", "varm", "obsp", "varp"):
        if len(getattr(adata, part)):
            raise InputError(f"a block holds no {part!r}; put it into a table of its own")
    if adata.raw is not None:
        raise InputError("a block holds no 'raw'; measured values have a file of their own")
    if 0 in adata.shape:
        raise InputError(
            f"a block needs samples and features, got {adata.n_obs} samples and {adata.n_vars} features"
        )


def _matrix(values: Any, what: str, dtype: Any = None) -> np.ndarray[Any, Any]:
    """Return a dense matrix: bool stays bool, all other numbers become float64."""
    dense = np.asarray(values.toarray() if hasattr(values, "toarray") else values)
    if dense.ndim != 2 or dense.dtype.kind not in "biuf":
        raise InputError(
            f"{what} of a block must be a table of numbers, got {dense.ndim} axes of {dense.dtype}"
        )
    keep_bool = dtype is None and dense.dtype.kind == "b"
    return np.ascontiguousarray(dense, dtype=bool if keep_bool else np.float64)


def _uns_text(key: Any, value: Any) -> str:
    if not isinstance(value, str) or "/" in str(key):
        raise InputError(
            f"uns[{key!r}] of a block must be one text under a name without '/', got {type(value).__name__}"
        )
    return _legal(value)


def _stored_frame(frame: pd.DataFrame, what: str) -> tuple[pd.DataFrame, dict[str, str]]:
    """Return a table as it is stored, and the names that were changed: stored name to the one before."""
    columns = [str(name) for name in frame.columns]
    repeated = _repeated(columns)
    if repeated:
        raise InputError(f"columns of the {what}s have a name twice: {_few(repeated)}; rename them")
    index_name = (
        None if frame.index.name is None or str(frame.index.name) in columns else str(frame.index.name)
    )
    stored = _stored_names(columns if index_name is None else [*columns, index_name])
    data = {stored[name]: stored_column(frame.iloc[:, place]) for place, name in enumerate(columns)}
    index = pd.Index(_identifiers(frame.index, what), dtype=object, name=stored.get(index_name or "\0"))
    changed = {new: old for old, new in stored.items() if new != old}
    return pd.DataFrame(data, index=index), changed


def _stored_names(names: Iterable[str]) -> dict[str, str]:
    """Return for each name one that HDF5 takes for a name: no ``/``, not reserved, each once."""
    names = list(names)
    stored = {
        name: name for name in names if _legal(name).replace("/", "_") == name and name not in _RESERVED
    }
    for name in names:
        if name in stored:
            continue
        base = _legal(name).replace("/", "_")
        base = f"column{base}" if base in _RESERVED else base
        candidate, count = base, 1
        while candidate in stored.values():
            count += 1
            candidate = f"{base}_{count}"
        stored[name] = candidate
    return stored


def _identifiers(index: pd.Index[Any], what: str) -> list[str]:
    """Return the names of an axis as text; each there, each once."""
    missing = [str(place + 1) for place, name in enumerate(index) if _is_missing(name) or str(name) == ""]
    if missing:
        raise InputError(f"{what}s without a name, at position {_few(missing, quote=False)}; name them")
    names = [str(name) for name in index]
    repeated = _repeated(names)
    if repeated:
        raise InputError(
            f"{len(repeated)} {what}s have a name twice: {_few(repeated)}; each name may stand once"
        )
    illegal = [name for name in names if _legal(name) != name]
    if illegal:
        raise InputError(
            f"names of {what}s hold characters that cannot be stored: {_few(illegal)}; rename them"
        )
    return names


def stored_column(values: pd.Series[Any]) -> np.ndarray[Any, Any]:
    """Return a column as it is stored: float64, int64, bool, or text.

    Examples
    --------
    >>> stored_column(pd.Series([True, None], dtype=object)).tolist()
    ['true', '']
    >>> stored_column(pd.Series([1, None, 2.5], dtype=object)).tolist()
    [1.0, nan, 2.5]
    """
    cells = values.astype(object).tolist()
    missing = [_is_missing(cell) for cell in cells]
    present = [cell for cell, gone in zip(cells, missing, strict=True) if not gone]
    if present and all(isinstance(cell, bool | np.bool_) for cell in present) and not any(missing):
        return np.array(cells, dtype=bool)
    if _are_numbers(present) or (not present and values.dtype.kind == "f"):
        whole = all(isinstance(cell, int | np.integer) and abs(int(cell)) < 2**63 for cell in present)
        dtype = np.int64 if whole and present and not any(missing) else np.float64
        numbers = [np.nan if gone else cell for cell, gone in zip(cells, missing, strict=True)]
        return np.array(numbers, dtype=dtype)
    return np.array([_text(cell) for cell in cells], dtype=object)


def _are_numbers(cells: list[Any]) -> bool:
    numbers = int | float | np.integer | np.floating
    return bool(cells) and all(isinstance(c, numbers) and not isinstance(c, bool | np.bool_) for c in cells)


def _is_missing(cell: Any) -> bool:
    return (
        cell is None
        or cell is pd.NA
        or cell is pd.NaT
        or (isinstance(cell, float | np.floating) and cell != cell)
    )


def _text(cell: Any) -> str:
    if _is_missing(cell):
        return ""
    if isinstance(cell, bool | np.bool_):
        return "true" if cell else "false"
    if isinstance(cell, datetime):
        return cell.date().isoformat() if cell.time() == time() else cell.isoformat()
    if isinstance(cell, date | time):
        return cell.isoformat()
    return _legal(str(cell))


def _legal(text: str) -> str:
    """Return a text that HDF5 can hold: no NUL, no half of a surrogate pair."""
    return text.replace("\0", "").encode("utf-8", "replace").decode()


def _repeated(names: list[str]) -> list[str]:
    index = pd.Index(names, dtype=object)
    return list(dict.fromkeys(index[index.duplicated()]))


def _few(names: list[str], *, quote: bool = True) -> str:
    shown = ", ".join(repr(name) if quote else name for name in names[:5])
    return shown if len(names) <= 5 else f"{shown} and {len(names) - 5} more"
