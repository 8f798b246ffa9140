"""Reading a delivered .h5ad file: looked at before it is opened, so that neither its size nor its links can surprise."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import h5py
import numpy as np
from scipy import sparse

from workbench.errors import InputError

from .faults import listed
from .raw import ArrayBody, RawTable

LARGEST_ARRAY = 8 * 2**30


def read_h5ad(path: Path, *, array: str | None = None) -> RawTable:
    """Return one numeric array of an .h5ad file (``X``, or the layer named ``array``) as a `RawTable`.

    Rows are the file's observations, columns its variables; which of them are samples is found as for every
    table.

    Raises
    ------
    InputError
        When the file is damaged, has not the form of an .h5ad file, holds links to other files or places, has
        no such array, or would need more than 8 GB.
    """
    try:
        with h5py.File(path, "r") as file:
            _check_links(path, file)
            return _table(path, file, array or "X")
    except InputError:
        raise
    except Exception:
        raise InputError(
            f"{path}: the HDF5 file is damaged or cut short, or no .h5ad file; fetch it again"
        ) from None


def _check_links(path: Path, group: h5py.Group) -> None:
    for name in group:
        if isinstance(group.get(name, getlink=True), h5py.SoftLink | h5py.ExternalLink):
            raise InputError(
                f"{path}: '{group.name}/{name}' is a link to another place; write the .h5ad file without "
                "links"
            )
        item = group[name]
        if isinstance(item, h5py.Group):
            _check_links(path, item)
        elif item.external or item.is_virtual:
            raise InputError(
                f"{path}: '{item.name}' keeps its data in another file; write the .h5ad file in one piece"
            )


def _table(path: Path, file: h5py.File, array: str) -> RawTable:
    for part in ("obs", "var"):
        if not isinstance(file.get(part), h5py.Group):
            raise InputError(
                f"{path}: there is no '{part}' table in this HDF5 file, so it is no .h5ad file as anndata "
                "0.7 or later writes it"
            )
    rows, columns = _ids(path, file["obs"]), _ids(path, file["var"])
    values = _values(path, _node(path, file, array), (len(rows), len(columns)))
    return RawTable(
        path=path,
        form="h5ad",
        corner="",
        columns=columns,
        rows=rows,
        body=ArrayBody(values),
        notes=(f"{path.name}: read from array '{array}'",),
    )


def _node(path: Path, file: h5py.File, array: str) -> Any:
    layers = file.get("layers")
    names = [*(["X"] if "X" in file else []), *(layers if isinstance(layers, h5py.Group) else ())]
    if array not in names:
        raise InputError(
            f"{path}: there is no array '{array}'; the file has {listed(names) or 'none'}: name one of them"
        )
    return file["X"] if array == "X" else file["layers"][array]


def _ids(path: Path, frame: h5py.Group) -> tuple[str, ...]:
    name = frame.attrs.get("_index", "_index")
    node = frame.get(name)
    if isinstance(node, h5py.Group) and "values" in node:
        node = node["values"]
    if not isinstance(node, h5py.Dataset) or node.ndim != 1 or h5py.check_string_dtype(node.dtype) is None:
        raise InputError(
            f"{path}: the ids of '{frame.name}' (column '{name}') are not a list of texts; write the file "
            "again with text ids"
        )
    _check_size(path, frame.name, node.shape[0])
    return tuple(str(text) for text in node.asstr()[...])


def _check_size(path: Path, name: str, cells: int) -> None:
    if cells * 8 > LARGEST_ARRAY:
        raise InputError(
            f"{path}: '{name}' declares {cells:,} cells, more than {LARGEST_ARRAY // 2**30} GB; deliver a "
            "smaller table"
        )


def _values(path: Path, node: Any, shape: tuple[int, int]) -> np.ndarray:
    _check_size(path, node.name, shape[0] * shape[1])
    if isinstance(node, h5py.Group):
        values = _dense(path, node, shape)
    elif node.shape != shape or node.dtype.kind not in "biuf":
        raise InputError(
            f"{path}: '{node.name}' is {node.dtype} of shape {node.shape}; the ids ask for numbers of shape "
            f"{shape}"
        )
    else:
        values = node[...]
    return values.astype(np.float64)


def _dense(path: Path, node: h5py.Group, shape: tuple[int, int]) -> np.ndarray:
    kind = str(node.attrs.get("encoding-type", ""))
    form = {"csr_matrix": sparse.csr_matrix, "csc_matrix": sparse.csc_matrix}.get(kind)
    if form is None or tuple(node.attrs.get("shape", ())) != shape:
        raise InputError(
            f"{path}: '{node.name}' is stored as '{kind or 'unknown'}'; write it as a plain or a csr/csc "
            "array"
        )
    for part in ("data", "indices", "indptr"):
        _check_size(path, f"{node.name}/{part}", node[part].shape[0])
    matrix = form((node["data"][...], node["indices"][...], node["indptr"][...]), shape=shape)
    matrix.check_format(full_check=True)
    return matrix.toarray()
