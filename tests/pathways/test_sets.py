"""Tables of sets and of known links: what is read, what is noted, what is refused with line and way out."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from workbench.errors import InputError
from workbench.pathways import read_links, read_sets


def written(folder: Path, name: str, content: str | bytes) -> Path:
    path = folder / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return path


def test_a_table_of_three_columns_is_read_as_text(tmp_path: Path) -> None:
    rows = ["hsa01\tglycolysis\t0012", "hsa01\tglycolysis\t1e5", "hsa02\t\tNA", "", "hsa01\tglycolysis\t0012"]
    content = "\n".join(["set\tname\tfeature", *rows, ""])
    found = read_sets(written(tmp_path, "sets.tsv", content))
    assert [(one.id, one.name, one.members) for one in found.sets] == [
        ("hsa01", "glycolysis", {"0012", "1e5"}),
        ("hsa02", "hsa02", {"NA"}),
    ]
    assert found.notes == ("1 empty line left out", "1 member named twice in one set, counted once")
    assert found.members == {"0012", "1e5", "NA"}


def test_a_gmt_file_is_read_and_its_oddities_noted(tmp_path: Path) -> None:
    content = "\ufeffP1\thttps://a.b/P1\tA\tB\tB\r\n\r\nP2\ttwo\tC\r\nP1\tna\tD\r\nP3\tempty\r\n"
    found = read_sets(written(tmp_path, "sets.gmt", content))
    assert [(one.id, one.name, one.members) for one in found.sets] == [
        ("P1", "P1", {"A", "B", "D"}),
        ("P2", "two", {"C"}),
    ]
    assert found.notes == (
        "1 empty line left out",
        "1 member named twice in one set, counted once",
        "1 set on more than one line, joined: 'P1'",
        "1 set without members left out: 'P3'",
    )


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("a.tsv", "set\tname\nx\ty\n", "line 1 has no column 'feature'; a tab-separated table"),
        (
            "a.tsv",
            "set,name,feature\nx,y,z\n",
            "it has set,name,feature; its cells seem to be separated by commas",
        ),
        ("a.tsv", "set\tset\tfeature\nx\ty\tz\n", "line 1 has more than one column 'set'"),
        ("a.tsv", "set\tname\tfeature\nx\ty\n", "line 2 has 2 cells and the header 3"),
        ("a.tsv", "set\tname\tfeature\n\ty\tz\n", "line 2 names no set"),
        ("a.tsv", "set\tname\tfeature\n", "holds no set with a member"),
        ("a.tsv", "", "line 1 has no column 'set', 'feature'"),
        ("a.tsv", b"set\tname\tfeature\nx\ty\t\xe9\n", "line 2 is not UTF-8 text"),
        ("a.tsv", b"set\0\n", "holds zero bytes"),
        ("a.gmt", "P1\n", "line 1 has 1 field; a .gmt line needs the id"),
        ("a.gmt", "\tname\tA\n", "line 1 has 3 fields; a .gmt line needs the id"),
        ("a.gmt", "P1\tname\n", "holds no set with a member"),
    ],
)
def test_what_cannot_be_read_is_refused_by_line(
    tmp_path: Path, name: str, content: str | bytes, message: str
) -> None:
    with pytest.raises(InputError, match=message):
        read_sets(written(tmp_path, name, content))


def test_a_lacking_or_large_file_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    with pytest.raises(InputError, match=r"none\.tsv: cannot be read: No such file"):
        read_sets(tmp_path / "none.tsv")
    monkeypatch.setattr("workbench.pathways.sets.MAXIMUM_BYTES", 10)
    with pytest.raises(InputError, match="more than 10 bytes"):
        read_sets(written(tmp_path, "a.gmt", "P1\tname\tA\tB\n"))


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.binary(max_size=80), st.sampled_from(["a.tsv", "a.gmt"]))
def test_any_bytes_are_read_or_refused_with_the_reason(tmp_path: Path, content: bytes, name: str) -> None:
    path = written(tmp_path, name, b"set\tname\tfeature\n" * (name == "a.tsv") + content)
    try:
        found = read_sets(path)
        outcome = all(one.members and one.id for one in found.sets)
    except InputError as error:
        outcome = str(path) in str(error)
    assert outcome


def test_links_have_no_direction_and_gather_their_evidence(tmp_path: Path) -> None:
    content = (
        "source\ttarget\tevidence\nA\tB\tenzyme\nB\tA\tassay\nA\tB\tenzyme\nA\tA\tself\n\tB\tx\nC\tD\t\n"
    )
    found = read_links(written(tmp_path, "links.tsv", content))
    assert found.evidence == {frozenset("AB"): "enzyme; assay", frozenset("CD"): "listed"}
    assert found.notes == (
        "2 lines without two different ends left out",
        "2 links named again, joined with the first",
    )
    bare = read_links(written(tmp_path, "bare.tsv", "target\tsource\nA\tB\n"))
    assert bare.evidence == {frozenset("AB"): "listed"}
    with pytest.raises(InputError, match="line 1 has no column 'target'"):
        read_links(written(tmp_path, "none.tsv", "source\tname\nA\tB\n"))
