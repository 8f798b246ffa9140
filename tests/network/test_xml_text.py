"""Any text becomes legal XML and comes back; any set of names becomes legal and stays distinct."""

from __future__ import annotations

import re

import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from lxml import etree

from workbench.network.xml_text import RESERVED_NAMES, legal_names, legal_text, restore_text

anything = st.text(st.characters() | st.sampled_from("\\u0a41\x00\ud800\ufffe"))


@given(anything)
@example("\\u0041")
@example("\\\x07\\u00\ud83d")
@example("\\u005cu0041")
def test_every_text_comes_back(text: str) -> None:
    assert restore_text(legal_text(text)) == text


@given(anything)
def test_every_text_is_taken_by_an_xml_library(text: str) -> None:
    element = etree.Element("a")
    element.text = legal_text(text)
    assert (etree.fromstring(etree.tostring(element, encoding="UTF-8")).text or "") == legal_text(text)


@pytest.mark.parametrize(
    "text", ["plain", "<b>&amp;]]>", "'\"", "שלום \u202e", "🧬", "a\tb\nc\rd", "\\n \\u12", ""]
)
def test_legal_text_stays_as_it_is(text: str) -> None:
    assert legal_text(text) == text


@pytest.mark.parametrize(
    ("text", "written"),
    [("\x00", "\\u0000"), ("a\x1b[31m", "a\\u001b[31m"), ("\ud800", "\\ud800"), ("\uffff", "\\uffff")],
)
def test_forbidden_characters_stay_readable(text: str, written: str) -> None:
    assert legal_text(text) == written


@given(st.lists(anything, unique=True))
@example(["HMDB ID", "HMDB_ID", "HMDB_ID_2", "HMDB.ID"])
@example(["1", "_1", "id", "id_", "", "_"])
def test_names_are_legal_and_distinct(names: list[str]) -> None:
    given_names = legal_names(names)
    assert list(given_names) == names
    assert len(set(given_names.values())) == len(names)
    for name, legal in given_names.items():
        assert re.fullmatch(r"[A-Za-z_][A-Za-z0-9_.-]*", legal)
        assert legal not in RESERVED_NAMES
        if re.fullmatch(r"[A-Za-z_][A-Za-z0-9_.-]*", name) and name not in RESERVED_NAMES:
            assert legal == name
