"""Proportions and methylated shares are read within their limits, with the place of what lies outside."""

from __future__ import annotations

from pathlib import Path

import pytest

from workbench.errors import InputError
from workbench.intake.table import delivered_table


def read(folder: Path, cells: str, values: str) -> list[list[float]]:
    path = folder / "shares.csv"
    path.write_text(f"sample,x,y\nS1,{cells}\nS2,0.1,0.9\n", encoding="utf-8")
    return delivered_table(path, sample_ids=["S1", "S2"], values=values).values.to_numpy().tolist()


@pytest.mark.parametrize("values", ["proportions", "beta"])
def test_shares_are_read_as_they_are(tmp_path: Path, values: str) -> None:
    assert read(tmp_path, "0,1", values) == [[0.0, 1.0], [0.1, 0.9]]


def test_percentages_are_proportions_too(tmp_path: Path) -> None:
    assert read(tmp_path, "40,60", "proportions")[0] == [40.0, 60.0]


@pytest.mark.parametrize(
    ("cells", "values", "told"),
    [
        (
            "0.5,1.5",
            "beta",
            r"1 cell is outside 0 to 1, though the values are beta: line 2, column 3 \(feature 'y'",
        ),
        ("-0.5,0.5", "beta", "1 cell is outside 0 to 1"),
        (
            "-0.5,0.5",
            "proportions",
            r"1 cell is negative, though the values are proportions: line 2, column 2",
        ),
    ],
)
def test_what_is_no_share_is_refused_with_its_place(
    tmp_path: Path, cells: str, values: str, told: str
) -> None:
    with pytest.raises(InputError, match=told):
        read(tmp_path, cells, values)
