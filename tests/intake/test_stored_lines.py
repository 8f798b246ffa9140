"""Lines left in a file are those that stand in memory otherwise, and a file that changes meanwhile is refused."""

import re

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from intake.delivered import SHEET, tabbed, write

from workbench.errors import InputError
from workbench.intake import delivered_table
from workbench.intake.files import read_lines
from workbench.intake.stored_lines import StoredLines, stored_lines

FILES = settings(deadline=None, max_examples=100, suppress_health_check=[HealthCheck.function_scoped_fixture])
pieces = st.sampled_from(["a", "1\t2", "\u00b5", "\U0001f9ec", " ", "\n", "\r\n", "\n\n", "x\u2028y", ""])


@FILES
@given(parts=st.lists(pieces, max_size=40), mark=st.booleans())
def test_stored_lines_are_those_in_memory(tmp_path, parts, mark):
    data = (b"\xef\xbb\xbf" if mark else b"") + "".join(parts).encode()
    path = tmp_path / "t.txt"
    path.write_bytes(data)
    found = stored_lines(path, 3 if mark else 0)
    if found is None:
        with pytest.raises(InputError, match=r"holds no text|is empty"):
            read_lines(path)
    else:
        lines = read_lines(path).lines
        assert list(found) == list(lines)
        assert list(found[1:]) == list(lines[1:])
        assert list(found[-2:1]) == list(lines[-2:1])


@pytest.mark.parametrize("data", [b"a\rb\n", b"a\0\n", b"\xff\n", "a\ufffd\n".encode(), b"a\xc2"])
def test_what_is_not_plain_is_left_to_the_careful_reader(tmp_path, data):
    assert stored_lines(write(tmp_path, "t.txt", data)) is None


def test_a_large_table_is_read_from_its_file_with_the_same_result_and_places(tmp_path, monkeypatch):
    rows = [f"g{k} {k} -{k} 0.{k}" for k in range(500)]
    path = write(tmp_path, "t.tsv", "\ufeff# made\n" + tabbed("id S1 S2 S3", *rows, end="\r\n"))
    in_memory = delivered_table(path, sample_ids=SHEET, values="log")
    monkeypatch.setattr("workbench.intake.files._LARGE", 1)
    assert isinstance(read_lines(path).lines, StoredLines)
    stored = delivered_table(path, sample_ids=SHEET, values="log")
    assert stored.values.equals(in_memory.values)
    assert stored.notes == in_memory.notes
    with pytest.raises(InputError, match=re.escape("line 4, column 3 (feature 'g1', sample 'S2'): '-1'")):
        delivered_table(path, sample_ids=SHEET, values="counts")


def test_a_file_that_changes_is_refused(tmp_path):
    path = write(tmp_path, "t.txt", "a\n" * 200)
    lines = stored_lines(path)
    path.write_text("abc")
    with pytest.raises(InputError, match=r"t\.txt: the file changed while it was read"):
        list(lines)
