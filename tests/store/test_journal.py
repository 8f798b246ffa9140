"""The journal has a line for each command, and survives being cut off."""

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from workbench import __version__
from workbench.errors import DamageError
from workbench.store.journal import append, journal_line, mend, mended, read_journal, source_hashes
from workbench.store.recovery import recover

VALUES = st.recursive(
    st.none() | st.booleans() | st.integers() | st.text(),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(), inner, max_size=3),
    max_leaves=8,
)


def test_lines_come_back_in_order_with_time_and_version(tmp_path):
    append(tmp_path, {"command": "init", "time": "2026-01-02T03:04:05Z"})
    append(tmp_path, {"command": "run", "stages": ("read:a", "prepare:a")})
    first, second = read_journal(tmp_path)
    assert first == {"time": "2026-01-02T03:04:05Z", "version": __version__, "command": "init"}
    assert second["stages"] == ["read:a", "prepare:a"]
    assert second["time"].startswith("20")
    assert second["time"].endswith("Z")
    assert list(second) == ["time", "version", "command", "stages"]


def test_a_project_without_a_journal_has_no_entries(tmp_path):
    assert read_journal(tmp_path) == []
    mend(tmp_path)
    assert not (tmp_path / "journal.jsonl").exists()


@given(entry=st.dictionaries(st.text(min_size=1), VALUES, max_size=5))
def test_any_entry_is_one_line_and_comes_back(entry):
    line = journal_line({"time": "t", "version": "v", **entry})
    assert line.count(b"\n") == 1
    assert json.loads(line) == {"time": "t", "version": "v", **entry}


def test_a_name_that_is_not_utf8_is_one_line_and_comes_back():
    name = b"Prot\xe9ines.tsv".decode("utf-8", "surrogateescape")
    assert json.loads(journal_line({"file": name}))["file"] == name


@given(cut=st.integers(min_value=0, max_value=200))
def test_a_journal_cut_anywhere_keeps_its_whole_lines(cut):
    lines = [journal_line({"command": f"number {i}", "time": "t"}) for i in range(4)]
    whole = b"".join(lines)
    cut = min(cut, len(whole))
    kept = mended(whole[:cut])
    full = [i for i in range(5) if cut >= len(b"".join(lines[:i])) - 1]
    assert kept == b"".join(lines[: full[-1]])


def test_recovery_mends_the_file_and_the_next_line_starts_anew(tmp_path):
    append(tmp_path, {"command": "init"})
    with (tmp_path / "journal.jsonl").open("ab") as stream:
        stream.write(b'{"time": "2026')
    assert [line["command"] for line in read_journal(tmp_path)] == ["init"]
    recover(tmp_path)
    assert (tmp_path / "journal.jsonl").read_bytes().endswith(b'"init"}\n')
    append(tmp_path, {"command": "run"})
    assert [line["command"] for line in read_journal(tmp_path)] == ["init", "run"]


def test_a_damaged_line_in_the_middle_is_told_with_its_number(tmp_path):
    for command in ("one", "two", "three"):
        append(tmp_path, {"command": command})
    lines = (tmp_path / "journal.jsonl").read_bytes().splitlines(keepends=True)
    (tmp_path / "journal.jsonl").write_bytes(lines[0] + lines[1][:20] + b"\n" + lines[2])
    with pytest.raises(DamageError, match=r"journal.jsonl: line 2 is not a line of a journal; restore"):
        read_journal(tmp_path)


def test_hashes_of_sources_are_the_latest_and_pass_over_what_cannot_be_read(tmp_path):
    append(
        tmp_path, {"sources": [{"file": "source/a", "sha256": "old"}, {"file": "source/b", "sha256": "b"}]}
    )
    append(tmp_path, {"sources": [{"file": "source/a", "sha256": "new"}]})
    append(tmp_path, {"sources": "text"})
    append(tmp_path, {"sources": [{"file": 1}, "x", {"file": "source/c", "sha256": None}]})
    with (tmp_path / "journal.jsonl").open("ab") as stream:
        stream.write(b"not json\n\xff\n[1]\n")
    assert source_hashes(tmp_path) == {"source/a": "new", "source/b": "b"}
