"""Tables are equal bytes for equal content, and come back."""

import dataclasses
import json
import math
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from workbench.errors import DamageError, InputError
from workbench.store.tables import TEXT_COLUMNS, json_bytes, read_table, table_bytes

WORDS = st.text(st.characters(exclude_categories=["Cs", "Cc", "Zl", "Zp"]), max_size=8)


def back(tmp_path, frame, **options):
    (tmp_path / "table.tsv").write_bytes(table_bytes(frame))
    return read_table(tmp_path / "table.tsv", **options)


def cells(values):
    """Return how a column of values is written, without its header."""
    return table_bytes(pd.DataFrame({"x": values})).decode().split("\n")[1:-1]


def test_numbers_have_nine_digits_and_no_negative_zero():
    assert cells([1 / 3, 2e-300, 1e22, 100000.0, -0.0, -1e-400]) == [
        "0.333333333",
        "2e-300",
        "1e+22",
        "100000",
        "0",
        "0",
    ]
    assert cells([math.nan, math.inf, -math.inf]) == ["", "inf", "-inf"]
    assert cells(np.array([0.1, 0.2], dtype=np.float32)) == ["0.100000001", "0.200000003"]


def test_missing_is_empty_and_truth_is_a_word():
    assert cells([None, True, False, pd.NA, pd.NaT, np.bool_(True)]) == ["", "true", "false", "", "", "true"]
    assert cells(pd.array([1, None], dtype="Int64")) == ["1", ""]
    assert cells(pd.Categorical(["a", None])) == ["a", ""]
    assert cells([2**70, -3, 1.5, "t"]) == [str(2**70), "-3", "1.5", "t"]


def test_breaks_inside_a_text_become_spaces_and_the_rest_stays():
    text = "a\tb\nc\r\nd\x0be\x85f\u2028g\0h"
    assert cells([text]) == ["a b c  d e f g h"]
    assert cells(['"quoted"', "=SUM(A1)", " spaces ", "ünïcode 葡萄糖", "#x"]) == [
        '"quoted"',
        "=SUM(A1)",
        " spaces ",
        "ünïcode 葡萄糖",
        "#x",
    ]
    assert table_bytes(pd.DataFrame({"a\tb": [1]})).startswith(b"a b\n")


def test_the_index_is_not_written_and_the_frame_not_changed():
    frame = pd.DataFrame({"r": [0.5, -0.0]}, index=["a", "b"])
    copy = frame.copy(deep=True)
    assert table_bytes(frame) == b"r\n0.5\n0\n"
    pd.testing.assert_frame_equal(frame, copy)


def test_two_columns_of_one_name_and_no_column_are_refused():
    with pytest.raises(InputError, match="two columns of one name: 'a b'"):
        table_bytes(pd.DataFrame([[1, 2]], columns=["a b", "a\tb"]))
    with pytest.raises(InputError, match="a table needs a column"):
        table_bytes(pd.DataFrame(index=["a"]))


def test_identifiers_that_look_like_numbers_stay_text(tmp_path):
    odd = ["0012", "1e5", "NA", "nan", "TRUE", "", "7157", "inf", "1.0"]
    frame = pd.DataFrame({"feature": odd, "mine": odd[::-1], "entrez": ["7157"] * 9, "gene": ["0012"] * 9})
    pd.testing.assert_frame_equal(back(tmp_path, frame, text=["mine"]), frame)
    assert {"feature", "source", "target", "block", "entrez"} <= TEXT_COLUMNS


def test_columns_are_read_by_what_stands_in_them(tmp_path):
    frame = pd.DataFrame(
        {
            "r": [0.25, math.nan, 1e-12],
            "n": [1, -20, 0],
            "tested": [True, False, True],
            "word": ["a", "", "1"],
            "gone": [math.nan] * 3,
            "limit": [math.inf, -math.inf, 0.5],
            "partly": ["true", "", "false"],
        }
    )
    pd.testing.assert_frame_equal(back(tmp_path, frame), frame)


def test_a_table_without_rows_keeps_its_columns(tmp_path):
    frame = back(tmp_path, pd.DataFrame({"feature": [], "r": []}))
    assert list(frame.columns) == ["feature", "r"]
    assert len(frame) == 0


@settings(max_examples=100, deadline=None)
@given(
    numbers=st.lists(st.floats(), min_size=3, max_size=3),
    whole=st.lists(st.integers(-(10**17), 10**17), min_size=3, max_size=3),
    words=st.lists(WORDS, min_size=3, max_size=3),
)
def test_a_second_writing_gives_the_same_bytes(tmp_path_factory, numbers, whole, words):
    folder = tmp_path_factory.mktemp("any")
    frame = pd.DataFrame({"r": numbers, "n": whole, "feature": words})
    read = back(folder, frame)
    assert table_bytes(read) == table_bytes(frame)
    assert read["n"].tolist() == whole
    assert read["feature"].tolist() == words
    np.testing.assert_allclose(read["r"].astype(float), numbers, rtol=5e-9)


def test_a_table_that_is_none_is_told_with_the_line(tmp_path):
    path = tmp_path / "table.tsv"
    with pytest.raises(InputError, match=r"table.tsv: is missing; run `workbench run`"):
        read_table(path)
    faults = {
        b"a\tb\n1\t2\n3\n": "line 3 has 1 cells, the header 2",
        b"a\ta\n": "line 1 is not a header of different names",
        b"": "line 1 is not a header",
        b"a\n\xff\n": "cannot be read as UTF-8 text",
    }
    for data, told in faults.items():
        path.write_bytes(data)
        with pytest.raises(DamageError, match=told):
            read_table(path)


def test_a_wide_table_is_written_whole():
    frame = pd.DataFrame(np.random.default_rng(1).normal(size=(300, 1000)))
    data = table_bytes(frame)
    assert data.count(b"\n") == 301
    assert data.count(b"\t") == 301 * 999


@dataclasses.dataclass
class Part:
    """A result with a number and a path."""

    r: float
    file: Path


def test_a_record_is_sorted_and_plain():
    record = {
        "b": np.float32(0.5),
        "a": [np.int64(1), np.bool_(True), None],
        3: {"z", "y"},
        "p": Part(1.0, Path("a/b")),
    }
    expected = {"3": ["y", "z"], "a": [1, True, None], "b": 0.5, "p": {"file": "a/b", "r": 1.0}}
    assert json.loads(json_bytes(record)) == expected
    assert json_bytes(record) == json_bytes(dict(reversed(record.items())))
    assert json_bytes({"x": [math.nan, math.inf, np.array([1.5, math.nan])]}) == json_bytes(
        {"x": [None, None, [1.5, None]]}
    )
    assert json_bytes("ä\udc80").decode() == '"ä\\udc80"\n'


def test_what_has_no_json_is_a_mistake():
    with pytest.raises(TypeError, match="no JSON for a complex"):
        json_bytes({"x": 1j})
    with pytest.raises(TypeError, match="no JSON for a type"):
        json_bytes({"x": Part})
