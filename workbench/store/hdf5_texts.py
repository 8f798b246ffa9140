"""The texts of an HDF5 file, followed from their pointers before the HDF5 library does: it follows wrong ones for ever.

References are to the HDF5 File Format Specification, version 3.0. Texts stand in collections (section III.E,
"Global Heap"): the signature ``GCOL``, a version, the collection's size, then one text after the other, each
with a number and a length; number 0 is the space that is left. Arrays and attributes point at them by length,
address and number (section IV.B, "Variable-length"). Attributes stand in the header of their object
(sections IV.A.1.a and IV.A.2.m).
"""

from __future__ import annotations

import mmap
import struct
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

POINTER = 16
"""Bytes of a pointer to a text: 4 of length, 8 of address, 4 of number."""

_COLLECTION = b"GCOL\x01\x00\x00\x00"
_TEXT = struct.Struct("<HHLQ")  # number, references, reserved, length
_HEADER = struct.Struct("<BxHLL4x")  # version, messages, references, size
_MESSAGE = struct.Struct("<HHB3x")  # type, size, flags
_CONTINUED, _ATTRIBUTE = 0x0010, 0x000C
_VARIABLE_LENGTH = 9
_MOST_PARTS = 10_000


class RefusedError(Exception):
    """A file holds something that is not read; the message says what and where."""


@dataclass(frozen=True)
class Texts:
    """All texts of a file: where each stands and how long it is, sorted by place.

    Attributes
    ----------
    keys : ndarray of shape (n_texts,)
        Address of the collection and number in it, in one.
    lengths : ndarray of shape (n_texts,)
    """

    keys: NDArray[np.uint64]
    lengths: NDArray[np.uint64]

    def length_behind(self, pointers: bytes) -> int:
        """Return the bytes that the texts behind some pointers have together.

        Raises
        ------
        RefusedError
            When a pointer leads to no text, or to a shorter one than it says.
        """
        table = np.frombuffer(pointers, dtype=[("length", "<u4"), ("address", "<u8"), ("number", "<u4")])
        table = table[(table["length"] > 0) | (table["address"] > 0)]
        if (table["address"] >= 1 << 48).any() or (table["number"] >= 1 << 16).any():
            raise RefusedError("a pointer leads out of the file")
        keys = _key(table["address"], table["number"])
        places = np.searchsorted(self.keys, keys)
        if (places >= self.keys.size).any() or (self.keys[places] != keys).any():
            raise RefusedError("a pointer leads to no text")
        if (self.lengths[places] < table["length"]).any():
            raise RefusedError("a text is shorter than its pointer says")
        return int(table["length"].sum(dtype=np.uint64))


def _key(address: Any, number: Any) -> NDArray[np.uint64]:
    return np.asarray(address, dtype=np.uint64) << np.uint64(16) | np.asarray(number, dtype=np.uint64)


def texts_of(data: mmap.mmap) -> Texts:
    """Return the texts of a file.

    Raises
    ------
    RefusedError
        When the lengths of a collection do not lead to its end.
    """
    found: list[tuple[int, int, int]] = []
    start = data.find(_COLLECTION)
    while start >= 0:
        found += _collection(data, start)
        start = data.find(_COLLECTION, start + len(_COLLECTION))
    table = np.array(sorted(found), dtype=np.uint64).reshape(-1, 3)
    return Texts(_key(table[:, 0], table[:, 1]), table[:, 2].copy())


def _collection(data: mmap.mmap, start: int) -> Iterator[tuple[int, int, int]]:
    """Yield address, number and length of each text of a collection."""
    place = start + 16
    end = start + int.from_bytes(data[start + 8 : place], "little")
    if not place <= end <= len(data):
        raise RefusedError("a collection of texts leads out of the file")
    while end - place >= _TEXT.size:
        number, _, _, length = _TEXT.unpack_from(data, place)
        if number == 0:
            if length != end - place:
                raise RefusedError("the lengths of its texts are wrong")
            return
        place += _TEXT.size + (length + 7) // 8 * 8
        if place > end:
            raise RefusedError("the lengths of its texts are wrong")
        yield start, number, length


def attribute_pointers(data: mmap.mmap, address: int) -> Iterator[bytes]:
    """Yield the pointers of every attribute of text that the object at an address has.

    Raises
    ------
    RefusedError
        When the header is not laid out as this program's files are, or leads out of the file.
    """
    try:
        for place, size in _messages(data, address):
            pointers = _pointers_of(data[place : place + size])
            if pointers:
                yield pointers
    except (struct.error, IndexError) as error:
        raise RefusedError("a header leads out of the file") from error


def _messages(data: mmap.mmap, address: int) -> Iterator[tuple[int, int]]:
    """Yield place and size of every attribute in the parts of an object's header."""
    version, _, _, size = _HEADER.unpack_from(data, address)
    if version != 1:
        raise RefusedError("a header is of another version")
    parts = [(address + _HEADER.size, size)]
    for count, (start, length) in enumerate(parts):
        if start + length > len(data) or count > _MOST_PARTS:
            raise RefusedError("a header leads out of the file")
        place = start
        while place + _MESSAGE.size <= start + length:
            kind, size, _ = _MESSAGE.unpack_from(data, place)
            place += _MESSAGE.size
            if kind == _CONTINUED:
                parts.append(struct.unpack_from("<QQ", data, place))
            elif kind == _ATTRIBUTE:
                yield place, size
            place += size


def _pointers_of(message: bytes) -> bytes:
    """Return the pointers of one attribute; none when it is not of texts."""
    version = message[0]
    sizes = struct.unpack_from("<HHH", message, 2)
    place = 9 if version == 3 else 8
    starts = []
    for size in sizes:
        starts.append(place)
        place += (size + 7) // 8 * 8 if version == 1 else size
    _, datatype, dataspace = starts
    if message[datatype] & 0x0F != _VARIABLE_LENGTH:
        return b""
    rank = message[dataspace + 1]
    shape = struct.unpack_from(f"<{rank}Q", message, dataspace + (8 if message[dataspace] == 1 else 4))
    count = 1
    for length in shape:
        count *= length
    pointers = message[place : place + count * POINTER]
    if len(pointers) != count * POINTER:
        raise RefusedError("a note is cut off")
    return pointers
