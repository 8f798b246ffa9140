"""Reading a delivered .h5ad file, after a look at its links and sizes, so that neither can surprise."""

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
_LARGE = 2**28
_MOST_PACKED = 1100  # deflate, the packing that HDF5 files use, reaches 1,032 to 1


def read_h5ad(path: Path, *, array: str | None = None) -> RawTable:
    """Return one numeric array of an .h5ad file (``X`` or a layer; to be named when there are several).

    Rows are the file's observations, columns its variables; which of them are samples is found as for every
    table.

    Raises
    ------
    InputError
        When the file is damaged, has not the form of an .h5ad file, keeps what is read behind links, has no
        such array, or would need more than 8 GB.
    """
    try:
        with h5py.File(path, "r") as file:
            return _Reader(path, file).table(array)
    except (
        OSError,
        KeyError,
        ValueError,
        TypeError,
        IndexError,
        RuntimeError,
        MemoryError,
        AttributeError,
        ArithmeticError,
    ):
        raise InputError(
            f"{path}: the HDF5 file is damaged or cut short, or no .h5ad file; fetch it again"
        ) from None


class _Reader:
    """Reads from an open file nothing that it has not looked at first."""

    def __init__(self, path: Path, file: h5py.File) -> None:
        self.path = path
        self.file = file

    def table(self, array: str | None) -> RawTable:
        array = array or self._only_array()
        rows, columns = (self._ids(self._child(self.file, part)) for part in ("obs", "var"))
        values = self._values(self._array(array), (len(rows), len(columns)))
        return RawTable(
            path=self.path,
            form="h5ad",
            corner="",
            columns=columns,
            rows=rows,
            body=ArrayBody(values),
            notes=(f"{self.path.name}: read from array '{array}'",),
            array=array,
        )

    def _refuse(self, what: str, way_out: str) -> InputError:
        return InputError(f"{self.path}: {what}; {way_out}")

    def _child(self, group: Any, name: str) -> Any:
        """Return a member of a group, unless it is a link or keeps its data in another file."""
        if not isinstance(group, h5py.Group) or name not in group:
            raise self._refuse(
                f"there is no '{name}' in '{getattr(group, 'name', '/')}', so this is no .h5ad file as "
                "anndata 0.7 or later writes it",
                "write it again with a current version",
            )
        link = isinstance(group.get(name, getlink=True), h5py.SoftLink | h5py.ExternalLink)
        item = None if link else group[name]
        if item is None or (isinstance(item, h5py.Dataset) and (item.external or item.is_virtual)):
            raise self._refuse(
                f"'{name}' in '{group.name}' is a link to another place", "write the file in one piece"
            )
        return item

    def _array_names(self) -> list[str]:
        layers = list(self._child(self.file, "layers")) if "layers" in self.file else []
        return [*(["X"] if "X" in self.file else []), *layers]

    def _only_array(self) -> str:
        """Return the one array of the file; which of several is meant, a person must say."""
        names = self._array_names()
        if len(names) > 1:
            what = f"the file has {len(names)} arrays: {listed(names)}"
            raise self._refuse(what, "name the one with the values to read (array)")
        return "X"

    def _array(self, name: str) -> Any:
        names = self._array_names()
        if name not in names:
            known = listed(names) if names else "none"
            raise self._refuse(f"there is no array '{name}'; the file has {known}", "name one of them")
        return self._child(self.file if name == "X" else self.file["layers"], name)

    def _ids(self, frame: Any) -> tuple[str, ...]:
        name = str(frame.attrs.get("_index", "_index"))
        node = self._child(frame, name)
        node = self._child(node, "values") if isinstance(node, h5py.Group) else node
        if node.ndim != 1 or h5py.check_string_dtype(node.dtype) is None:
            raise self._refuse(f"the ids of '{frame.name}' (column '{name}') are no texts", "write text ids")
        self._check_size(node)
        return tuple(str(text) for text in node.asstr()[...])

    def _check_size(self, node: Any, shape: tuple[int, ...] | None = None) -> None:
        cells = int(np.prod(node.shape if shape is None else shape, dtype=np.float64))
        if cells * 8 > LARGEST_ARRAY:
            what = f"'{node.name}' declares {cells:,} cells, more than {LARGEST_ARRAY // 2**30} GB"
            raise self._refuse(what, "deliver a smaller table")
        stored = node.id.get_storage_size() if isinstance(node, h5py.Dataset) else cells
        if cells * 8 > max(_LARGE, _MOST_PACKED * stored):
            what = f"'{node.name}' declares {cells:,} cells, and the file stores {stored:,} bytes of them"
            raise self._refuse(what, "write the file again, with all its numbers")

    def _values(self, node: Any, shape: tuple[int, int]) -> np.ndarray:
        self._check_size(node, shape)
        if isinstance(node, h5py.Group):
            return self._sparse(node, shape)
        if node.shape != shape or node.dtype.kind not in "biuf":
            what = f"'{node.name}' is {node.dtype} of shape {node.shape}; the ids ask for numbers of shape {shape}"
            raise self._refuse(what, "write the file again")
        return np.asarray(node[...], dtype=np.float64)

    def _sparse(self, node: h5py.Group, shape: tuple[int, int]) -> np.ndarray:
        kind = str(node.attrs.get("encoding-type", "unknown"))
        form = {"csr_matrix": sparse.csr_matrix, "csc_matrix": sparse.csc_matrix}.get(kind)
        if form is None or tuple(node.attrs.get("shape", ())) != shape:
            what = (
                f"'{node.name}' is stored as '{kind}', not as a plain or a csr or csc array of shape {shape}"
            )
            raise self._refuse(what, "write it as one of these")
        parts = [self._child(node, part) for part in ("data", "indices", "indptr")]
        for part in parts:
            self._check_size(part)
        data, indices, starts = (part[...] for part in parts)
        matrix = form((np.asarray(data, dtype=np.float64), indices, starts), shape=shape)
        matrix.check_format(full_check=True)
        return np.asarray(matrix.toarray())
