"""Texts of an HDF5 file are followed by their pointers, and wrong ones are refused at once."""

import mmap
import struct
import time

import h5py
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from workbench.store.hdf5_look import check_stored_whole, look_inside
from workbench.store.hdf5_texts import RefusedError, attribute_pointers, texts_of

BUDGET = 10_000_000


@pytest.fixture
def path(tmp_path):
    """Return a file with texts in arrays and in attributes."""
    place = tmp_path / "texts.h5"
    with h5py.File(place, "w") as file:
        file["names"] = ["alpha", "", "gamma", "ä" * 3000]
        file["one"] = "delta"
        file["empty"] = h5py.Empty("f4")
        file["numbers"] = np.arange(3.0)
        file.attrs["note"] = "epsilon"
        file["names"].attrs["list"] = ["zeta", "eta"]
        file["names"].attrs["number"] = 3
    return place


def looked_at(path):
    """Look at a whole file as a reader does."""
    with h5py.File(path, "r") as file:
        check_stored_whole(file, path, look_inside(file, BUDGET), BUDGET)


def changed(path, old, new, count=1):
    """Replace bytes of a file, which must stand there so often."""
    data = path.read_bytes()
    assert data.count(old) == count
    path.write_bytes(data.replace(old, new))


def test_whole_files_pass(path):
    looked_at(path)


def test_every_text_is_found_with_its_length(path):
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        lengths = sorted(texts_of(data).lengths.tolist())
    assert lengths == sorted([5, 0, 5, 6000, 5, 7, 4, 3])


def test_attributes_of_text_and_only_those_have_pointers(path):
    with h5py.File(path, "r") as file, path.open("rb") as stream:
        data = mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ)
        texts = texts_of(data)
        for name, lengths in (("/", [7]), ("names", [7]), ("one", []), ("numbers", [])):
            address = h5py.h5o.get_info(file[name].id).addr
            assert [texts.length_behind(p) for p in attribute_pointers(data, address)] == lengths
        data.close()


@pytest.mark.parametrize("version", ["earliest", "v108", "latest"])
def test_headers_of_another_version_are_refused_or_read(tmp_path, version):
    path = tmp_path / "a.h5"
    with h5py.File(path, "w", libver=(version, "latest")) as file:
        file["names"] = ["a", "b"]
        file.attrs["note"] = "c"
    if version == "earliest":
        looked_at(path)
    else:
        with pytest.raises(RefusedError, match="a header is of another version"):
            looked_at(path)


def test_many_attributes_in_several_parts_of_a_header_are_all_followed(tmp_path):
    path = tmp_path / "a.h5"
    with h5py.File(path, "w") as file:
        file["x"] = [1.0]
        for number in range(40):
            file["x"].attrs[f"note {number}"] = "y" * number
    with h5py.File(path, "r") as file, path.open("rb") as stream:
        data = mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ)
        texts = texts_of(data)
        found = [
            texts.length_behind(p) for p in attribute_pointers(data, h5py.h5o.get_info(file["x"].id).addr)
        ]
        data.close()
    assert sorted(found) == list(range(40))


def pointer_of(path, text):
    """Return the pointer to a text: its length, the collection's address, its number there."""
    data = path.read_bytes()
    place = data.index(text) - 16
    number, _, _, length = struct.unpack_from("<HHLQ", data, place)
    return struct.pack("<LQL", length, data.index(b"GCOL"), number)


@pytest.mark.parametrize(
    ("field", "value", "told"),
    [
        (0, 6, "a text is shorter than its pointer says"),
        (0, 2**31, "a text is shorter than its pointer says"),
        (1, 2**60, "a pointer leads out of the file"),
        (1, 8, "a pointer leads to no text"),
        (2, 999, "a pointer leads to no text"),
        (2, 2**31, "a pointer leads out of the file"),
    ],
)
@pytest.mark.parametrize("text", [b"alpha", b"delta", b"eta\0\0\0\0\0"])
def test_a_wrong_pointer_is_refused_at_once(path, text, field, value, told):
    right = pointer_of(path, text)
    parts = list(struct.unpack("<LQL", right))
    parts[field] = value
    changed(path, right, struct.pack("<LQL", *parts))
    start = time.perf_counter()
    with pytest.raises(RefusedError, match=told):
        looked_at(path)
    assert time.perf_counter() - start < 1


def test_a_wrong_pointer_to_an_empty_text_is_refused_too(path):
    right = pointer_of(path, b"delta")
    changed(path, right, struct.pack("<LQL", 0, 8, 1))
    with pytest.raises(RefusedError, match="a pointer leads to no text"):
        looked_at(path)


@pytest.mark.parametrize("length", [0, 4, 9, 2**40, 2**64 - 8])
def test_a_wrong_length_in_a_collection_is_refused_at_once(path, length):
    data = bytearray(path.read_bytes())
    struct.pack_into("<Q", data, data.index(b"alpha") - 8, length)
    path.write_bytes(bytes(data))
    with pytest.raises(
        RefusedError, match=r"lengths of its texts are wrong|a text is shorter|leads to no text"
    ):
        looked_at(path)


def test_a_collection_that_leads_out_of_the_file_is_refused(path):
    data = bytearray(path.read_bytes())
    struct.pack_into("<Q", data, data.index(b"GCOL") + 8, 10**9)
    path.write_bytes(bytes(data))
    with pytest.raises(RefusedError, match="a collection of texts leads out of the file"):
        looked_at(path)


@settings(max_examples=100, deadline=None)
@given(
    texts=st.lists(st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0")), max_size=30)
)
def test_any_texts_pass_and_add_up(tmp_path_factory, texts):
    path = tmp_path_factory.mktemp("any") / "a.h5"
    with h5py.File(path, "w") as file:
        file.create_dataset("names", data=texts, dtype=h5py.string_dtype(), shape=(len(texts),))
    looked_at(path)
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as data:
        assert int(texts_of(data).lengths.sum()) == sum(len(text.encode()) for text in texts)
