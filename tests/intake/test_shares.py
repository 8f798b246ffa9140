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


def told(folder: Path, table: str, values: str) -> tuple[str, ...]:
    path = folder / "shares.csv"
    path.write_text(table, encoding="utf-8")
    return delivered_table(path, sample_ids=["S1", "S2", "S3"], values=values).notes


def test_parts_per_million_are_proportions_and_a_sample_over_the_whole_is_told(tmp_path: Path) -> None:
    ppm = told(tmp_path, "sample,x,y\nS1,900000,100000\nS2,400000,600000\nS3,1,999999\n", "proportions")
    assert not any("add" in note for note in ppm)
    percent = told(tmp_path, "sample,x,y\nS1,40,60\nS2,10,10\nS3,90,80\n", "proportions")
    assert (
        "shares.csv: 1 sample adds up to more than 100 ('S3' to 170), though parts of one whole do not"
        in percent
    )
    ratios = told(tmp_path, "sample,x,y\nS1,0.9,0.8\nS2,0.5,0.9\nS3,0.9,1\n", "proportions")
    assert any("3 samples add up to more than 1 ('S1' to 1.7, 'S2' to 1.4" in note for note in ratios)


def test_a_few_missing_cells_of_many_are_no_zero_percent(tmp_path: Path) -> None:
    lines = [",".join(["sample", *(f"g{k}" for k in range(1000))])]
    lines += [",".join([sample, *("1" if k else "" for k in range(1000))]) for sample in ("S1", "S2")]
    lines.append(",".join(["S3", *"1" * 1000]))
    assert "shares.csv: 2 cells of 3,000 (0.07 %) missing" in told(tmp_path, "\n".join(lines), "continuous")
