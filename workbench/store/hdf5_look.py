"""A look into an HDF5 file before anything is read: only what is plain and fits into memory passes.

An HDF5 file can point to other files, hold loops, claim far more than it stores and carry objects that are
expensive or dangerous to load. `look_inside` visits the names, types and shapes alone.
"""

from __future__ import annotations

import mmap
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from workbench.store.hdf5_texts import POINTER, RefusedError, attribute_pointers, texts_of

SIGNATURE = b"\x89HDF\r\n\x1a\n"
"""First eight bytes of an HDF5 file (HDF5 File Format Specification, section II.A)."""

MOST_OBJECTS = 100_000
DEEPEST = 16


class TooLargeError(RefusedError):
    """What a file holds does not fit into the memory that it may take."""


@dataclass
class _Sum:
    """What a look has met so far."""

    budget: int
    objects: set[int] = field(default_factory=set)
    size: int = 0

    def add(self, where: str, size: int) -> None:
        self.size += size
        if self.size > self.budget:
            limit = _readable(self.budget)
            raise TooLargeError(
                f"{where!r} needs {_readable(self.size)} of memory; at most {limit} are taken"
            )


def has_signature(path: Path) -> bool:
    """Return whether a file starts like an HDF5 file.

    Raises
    ------
    OSError
        When it cannot be read.
    """
    with path.open("rb") as stream:
        return stream.read(len(SIGNATURE)) == SIGNATURE


def look_inside(file: h5py.File, budget: int) -> list[int]:
    """Return the addresses of all groups and arrays when all is plain and fits; no content is read.

    Parameters
    ----------
    file : h5py.File
        Open for reading.
    budget : int
        Bytes that all arrays together may take.

    Raises
    ------
    RefusedError
        On links to elsewhere, virtual or external arrays, loops, objects and references, too many or too
        deep groups; `TooLargeError` when the shapes do not fit into the budget.
    """
    met = _Sum(budget)
    _look_at_group(file, "", met, 0)
    return sorted(met.objects)


def _look_at_group(group: h5py.Group, where: str, met: _Sum, depth: int) -> None:
    _count(group, where, met)
    _look_at_attributes(group, where)
    if depth > DEEPEST:
        raise RefusedError(f"{where!r} is more than {DEEPEST} groups deep")
    for name in group:
        below = f"{where}/{name}"
        if not isinstance(group.get(name, getlink=True), h5py.HardLink):
            raise RefusedError(f"{below!r} is a link to elsewhere")
        member = group[name]
        if isinstance(member, h5py.Group):
            _look_at_group(member, below, met, depth + 1)
        elif isinstance(member, h5py.Dataset):
            _count(member, below, met)
            _look_at_attributes(member, below)
            _look_at_array(member, below, met)
        else:
            raise RefusedError(f"{below!r} is a type without data")


def _count(member: h5py.Group | h5py.Dataset, where: str, met: _Sum) -> None:
    identity = h5py.h5o.get_info(member.id).addr
    if identity in met.objects:
        raise RefusedError(f"{where!r} stands there under a second name")
    met.objects.add(identity)
    if len(met.objects) > MOST_OBJECTS:
        raise RefusedError(f"it holds more than {MOST_OBJECTS} arrays and groups")


def _look_at_attributes(member: h5py.Group | h5py.Dataset, where: str) -> None:
    for name in member.attrs:
        if not _is_plain(member.attrs.get_id(name).dtype):
            raise RefusedError(f"note {name!r} of {where or '/'!r} is neither numbers nor text")


def _look_at_array(array: h5py.Dataset, where: str, met: _Sum) -> None:
    if array.is_virtual or array.external:
        raise RefusedError(f"{where!r} takes its numbers from another file")
    if not _is_plain(array.dtype):
        raise RefusedError(f"{where!r} holds {array.dtype}, neither numbers nor text")
    met.add(where, (array.size or 0) * array.dtype.itemsize)


def _is_plain(dtype: np.dtype[Any]) -> bool:
    """Return whether elements are numbers, true/false or text: no objects, references or records."""
    if dtype.kind == "O":
        return h5py.check_string_dtype(dtype) is not None
    return dtype.kind in "biufS" and dtype.subdtype is None


def arrays(group: h5py.Group) -> Iterator[h5py.Dataset]:
    """Yield every array at and below a group."""
    for member in group.values():
        if isinstance(member, h5py.Group):
            yield from arrays(member)
        else:
            yield member


def check_stored_whole(file: h5py.File, path: Path, addresses: Iterable[int], budget: int) -> None:
    """Return when every array of a file stands there in one piece, as this program writes it.

    An array that is not chunked cannot unpack to more than the file holds. Texts are pointed at, and many
    pointers may share one long text: every pointer is followed, and the lengths are added up.

    Parameters
    ----------
    file : h5py.File
        Open for reading; no attribute of it has been read.
    path : Path
        Of the same file.
    addresses : iterable of int
        Of its groups and arrays, as `look_inside` returns them.
    budget : int
        Bytes that all texts together may take.

    Raises
    ------
    RefusedError
        When an array is chunked, packed or not all there, or a pointer leads nowhere; `TooLargeError` when
        the texts together are too long.
    """
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        texts, length = texts_of(data), 0
        for pointers in _pointers(file, data, addresses):
            length += texts.length_behind(pointers)
            if length > budget:
                limit = _readable(budget)
                raise TooLargeError(
                    f"its texts need {_readable(length)} of memory; at most {limit} are taken"
                )


def _pointers(file: h5py.File, data: mmap.mmap, addresses: Iterable[int]) -> Iterator[bytes]:
    """Yield the pointers to texts of every attribute and every array."""
    for address in addresses:
        yield from attribute_pointers(data, address)
    for array in arrays(file):
        if array.shape is None or array.size == 0:
            continue
        is_text = array.dtype.kind == "O"
        size, start = array.size * (POINTER if is_text else array.dtype.itemsize), array.id.get_offset()
        if array.chunks is not None or array.id.get_storage_size() != size or start is None:
            raise RefusedError(f"{array.name!r} is not stored in one piece")
        if start + size > len(data):
            raise RefusedError(f"{array.name!r} leads out of the file")
        if is_text:
            yield data[start : start + size]


def _readable(size: float) -> str:
    """Return a number of bytes in words.

    Examples
    --------
    >>> _readable(160e9)
    '160.0 GB'
    """
    for unit in ("bytes", "kB", "MB", "GB"):
        if size < 1000:
            return f"{size:.0f} {unit}" if unit == "bytes" else f"{size:.1f} {unit}"
        size /= 1000
    return f"{size:.1f} TB"
