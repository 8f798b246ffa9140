"""Mixed readings: text becomes numbers, gaps say nothing."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from prepare.measured import table_of

from workbench.errors import InputError
from workbench.prepare import MeasuredTable, PreparedTable, recipe_for

NAN = np.nan
AGE, SEX, STAGE = [40.0, 50.0, 60.0, 80.0, NAN, 45.0], [0, 1, 1, 0, 1, NAN], [0, 0, 1, 1, 2, 2]
LEVELS = (None, ("female", "male"), ("I", "II", "III"))
NAMES = ("age", "sex", "stage")


def clinic(*columns: list[float]) -> MeasuredTable:
    values = np.array(columns or (AGE, SEX, STAGE), dtype=float).T
    return MeasuredTable(values, tuple(f"P{i}" for i in range(len(values))), NAMES, LEVELS)


def fit_transform(table: MeasuredTable) -> PreparedTable:
    return recipe_for("clinical", "mixed").fit_transform(table, smallest_group=None, seed=1)


def test_numbers_are_kept_and_text_becomes_zero_and_one() -> None:
    result = fit_transform(clinic())
    assert result.features == ("age", "sex=male", "stage=I", "stage=II", "stage=III")
    assert result.origins == ("age", "sex", "stage", "stage", "stage")
    assert_array_equal(result.values[:4, 0], AGE[:4])
    assert_array_equal(result.values[:5, 1], SEX[:5])
    assert_array_equal(result.values[:, 2:].argmax(axis=1), STAGE)
    coding = next(entry for entry in result.account if entry.step == "text to numbers")
    assert coding.numbers["coding of sex"] == "0 = female, 1 = male"


def test_gaps_become_the_median_of_numbers_and_the_share_of_text() -> None:
    result = fit_transform(clinic())
    assert result.values[4, 0] == 50.0
    assert_allclose(result.values[5, 1], 3 / 5)
    assert_array_equal(np.argwhere(result.imputed), [[4, 0], [5, 1]])


def test_levels_that_training_lacks_count_as_missing_and_are_named() -> None:
    fitted = recipe_for("clinical", "mixed").fit(clinic(), smallest_group=None, seed=1)
    levels = (None, ("male", "other"), ("I", "III", "IV"))
    new = MeasuredTable(np.array([[30.0, 0, 1], [31.0, 1, 2]]), ("N1", "N2"), NAMES, levels)
    result = fitted.transform(new)
    assert_allclose(result.values, [[30, 1, 0, 0, 1], [31, 3 / 5, 1 / 3, 1 / 3, 1 / 3]])
    assert_array_equal(result.imputed, [[False] * 5, [False, True, True, True, True]])
    coding = next(entry for entry in result.account if entry.step == "text to numbers")
    assert coding.numbers["levels of stage not in training"] == "IV"
    assert "levels that training lacks count as missing ('sex', 'stage')" in coding.sentence


def test_levels_of_a_single_sample_make_no_column() -> None:
    result = fit_transform(clinic(AGE, [0, 0, 0, 0, 0, 1], [0, 0, 1, 1, 1, 2]))
    assert result.features == ("age", "stage=I", "stage=II")
    assert result.dropped == {
        "sex": "a level in only 1 sample",
        "stage=III": "the level in only 1 sample",
    }
    assert not result.imputed[5, 1:].any()


def test_text_with_one_level_is_constant_and_says_which() -> None:
    result = fit_transform(clinic(AGE, [1] * 6, STAGE))
    assert result.dropped["sex"] == "constant: 'male' wherever it has a value"


def test_rarely_measured_columns_are_dropped() -> None:
    result = fit_transform(clinic([1.0, 2.0, NAN, NAN, NAN, 3.0], SEX, STAGE))
    assert result.dropped == {"age": "measured in 3 of 6 samples; 5 needed"}


def test_a_name_that_is_also_an_indicator_is_refused() -> None:
    table = table_of(
        np.array([[0, 1.0], [0, 2.0], [1, 3.0], [1, 4.0], [2, 5.0], [2, 6.0]]), (("a", "b", "c"), None)
    )
    clash = MeasuredTable(table.values, table.samples, ("x", "x=a"), table.levels)
    with pytest.raises(InputError, match="has the name of another's indicator: 'x=a'; rename it"):
        fit_transform(clash)


@pytest.mark.parametrize("code", [2.0, -1.0, 0.5])
def test_codes_that_are_no_position_of_a_level_are_refused(code: float) -> None:
    with pytest.raises(InputError, match="codes that are no position of a level: 'sex'"):
        fit_transform(clinic(AGE, [code, 1, 1, 0, 1, 0], STAGE))
