"""Pieces of text: names cut in their middle, lists, percentages."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from workbench.look.words import listed, percent, short, small


@given(st.text(max_size=400), st.integers(4, 60))
def test_a_short_name_is_short_printable_and_on_one_line(name: str, length: int) -> None:
    cut = short(name, length)
    assert len(cut) <= length
    assert "\n" not in cut
    assert cut.isprintable()


def test_ends_are_kept() -> None:
    assert short("ENSG00000141510_isoform_7", 15) == "ENSG000…oform_7"
    assert short("TP53") == "TP53"


def test_lists_percentages_and_small_numbers() -> None:
    assert listed(["a"]) == "a"
    assert listed(["a", "b", "c", "d", "e"]) == "a, b, c, d and 1 more"
    assert [percent(x) for x in (0.0, 0.004, 0.0996, 1.0)] == ["0 %", "0.4 %", "10 %", "100 %"]
    assert [small(x) for x in (0.5, 0.0012, 0.0009)] == ["0.5", "0.0012", "9e-04"]
