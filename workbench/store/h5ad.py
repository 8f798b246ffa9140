"""Blocks on the disk: AnnData in HDF5, equal bytes for equal content, read only after a look."""

from __future__ import annotations

import io
from pathlib import Path
from typing import TYPE_CHECKING, Any

import h5py

from workbench.errors import DamageError, InputError, WorkbenchError
from workbench.store.files import refused, write_whole
from workbench.store.hdf5_look import TooLargeError, check_stored_whole, has_signature, look_inside
from workbench.store.hdf5_texts import RefusedError
from workbench.store.stored_form import RUN_SHEET, RUN_VALUES, restored, stored_form

if TYPE_CHECKING:
    import anndata as ad

BUDGET = 8 * 1024**3
"""Bytes of memory that the arrays of one block may take, unless the caller says otherwise: 8 GiB."""

_EMPTY_PARTS = ("obsm", "obsp", "varm", "varp")
_WAY_OUT = "delete it and run `workbench run`: it is made again from the sources"


def block_bytes(adata: ad.AnnData) -> memoryview:
    """Return the bytes of a block's file; equal blocks give equal bytes.

    The file is built in memory: HDF5 loses its way (up to ending the process) when the disk is full half-way.

    Raises
    ------
    InputError
        As `stored_form`.
    """
    from anndata.io import write_elem  # takes a second to load: not for commands that read no block

    stored = stored_form(adata)
    image = io.BytesIO()
    with h5py.File(image, "w", track_order=False) as file:
        write_elem(file, "/", stored)
    return image.getbuffer()


def write_block(path: Path, adata: ad.AnnData) -> None:
    """Write a block whole or not at all; the given block is not changed.

    What is stored is told in `workbench.store.stored_form`. Takes memory for a second copy of the block.

    Parameters
    ----------
    path : Path
        Where to; in a project the path that `Change.new_file` gave.
    adata : AnnData
        Samples x features.

    Raises
    ------
    InputError
        When the block cannot be stored as it is (names twice, no samples), or the disk is full or read-only.
    """
    data = block_bytes(adata)
    try:
        write_whole(path, data)
    except OSError as error:
        raise refused(error, path) from error


def read_block(path: Path, budget: int = BUDGET) -> ad.AnnData:
    """Return a block that `write_block` wrote; names, shapes and types are looked at before anything is read.

    Parameters
    ----------
    path : Path
    budget : int
        Bytes of memory that its arrays may take.

    Raises
    ------
    InputError
        When there is no such file, or it needs more memory than the budget.
    DamageError
        When it is cut off, damaged, or not a file that this program writes.
    """
    try:
        if not has_signature(path):
            raise DamageError(f"{path}: is not an HDF5 file, or its start is damaged; {_WAY_OUT}")
        with h5py.File(path, "r", locking=False) as file:
            addresses = look_inside(file, budget)
            check_stored_whole(file, path, addresses, budget)
            _check_layout(file)
            return restored(_read_elem(file))
    except FileNotFoundError as error:
        raise InputError(
            f"{path}: is missing; run `workbench run`: it is made again from the sources"
        ) from error
    except PermissionError as error:
        raise DamageError(f"{path}: no permission to read it; get the right to read this file") from error
    except TooLargeError as error:
        raise InputError(f"{path}: {error}; use a machine with more memory, or a smaller table") from error
    except RefusedError as error:
        raise DamageError(f"{path}: is not a block that this program wrote: {error}; {_WAY_OUT}") from error
    except WorkbenchError:
        raise
    except Exception as error:  # On damaged files h5py and anndata raise nearly anything.
        raise DamageError(f"{path}: is cut off or damaged; {_WAY_OUT}") from error


def _read_elem(file: h5py.File) -> ad.AnnData:
    from anndata.io import read_elem

    return read_elem(file)


def _check_layout(file: h5py.File) -> None:
    """Refuse what is not laid out as a block: X, layers of its shape, and a table for each axis."""
    if _encoding(file) != "anndata":
        raise RefusedError("it is not marked as AnnData")
    matrix = file.get("X")
    if not isinstance(matrix, h5py.Dataset) or matrix.dtype != "float64" or matrix.ndim != 2:
        raise RefusedError("'X' is not a table of numbers")
    for name, layer in _group(file, "layers").items():
        if not isinstance(layer, h5py.Dataset) or layer.shape != matrix.shape or layer.dtype.kind not in "fb":
            raise RefusedError(f"layer {name!r} is not a table of the shape of 'X'")
    for axis, length in zip(("obs", "var"), matrix.shape, strict=True):
        _check_table(_group(file, axis), axis, length)
    _check_notes(_group(file, "uns"), matrix.shape[1])
    if any(len(_group(file, part)) for part in _EMPTY_PARTS):
        raise RefusedError("it holds more than a block does")
    _check_no_raw(file)


def _check_notes(uns: h5py.Group, features: int) -> None:
    """Refuse notes that are not one text each; a table of runs with the runs' values beside it is one."""
    if RUN_SHEET in uns or RUN_VALUES in uns:
        values = uns.get(RUN_VALUES)
        if not isinstance(values, h5py.Dataset) or values.dtype != "float64" or values.ndim != 2:
            raise RefusedError("the values of its runs are not a table of numbers")
        if values.shape[1] != features or not values.shape[0]:
            raise RefusedError(f"the values of its runs do not fit 'X' of {features} features")
        _check_table(_group(uns, RUN_SHEET), RUN_SHEET, values.shape[0])
    for name, value in uns.items():
        if name in (RUN_SHEET, RUN_VALUES):
            continue
        if not isinstance(value, h5py.Dataset) or value.shape != () or value.dtype.kind != "O":
            raise RefusedError(f"note {name!r} is not one text")


def _check_no_raw(file: h5py.File) -> None:
    raw = file.get("raw")
    if raw is not None and not (isinstance(raw, h5py.Dataset) and raw.shape is None):
        raise RefusedError("it holds a second table under 'raw'")


def _check_table(table: h5py.Group, axis: str, length: int) -> None:
    index = table.attrs.get("_index")
    columns = [str(name) for name in table.attrs.get("column-order", ())]
    if _encoding(table) != "dataframe" or sorted([str(index), *columns]) != sorted(table):
        raise RefusedError(f"{axis!r} is not a table of named columns")
    for name, column in table.items():
        if not isinstance(column, h5py.Dataset) or column.shape != (length,):
            raise RefusedError(f"column {name!r} of {axis!r} does not fit its {length} rows")
    if table[str(index)].dtype.kind != "O":
        raise RefusedError(f"names in {axis!r} are not texts")


def _encoding(member: Any) -> str:
    return str(member.attrs.get("encoding-type", ""))


def _group(file: h5py.Group, name: str) -> h5py.Group:
    group = file.get(name)
    if not isinstance(group, h5py.Group):
        raise RefusedError(f"{name!r} is missing")
    return group
