"""Columns of the sample sheet as numbers: indicators, numbers, group codes; nothing missing is guessed."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from workbench.errors import InputError
from workbench.intake import design_columns, group_codes, missing_samples


def sheet_of(**columns):
    n = len(next(iter(columns.values())))
    return pd.DataFrame(columns, index=[f"S{k + 1}" for k in range(n)], dtype=object)


FRAME = sheet_of(
    batch=["b2", "b10", "b2", "b1", "b1", "b10"],
    age=["30.5", "41", "NA", "29", "55", "61"],
    run=["1", "2", "10", "1", "2", "10"],
    sex=["m", "f", "f", "m", "m", "f"],
    one=["x"] * 6,
    dose=["5"] * 6,
)


def test_classes_are_indicators_without_the_first_level_and_numbers_stay():
    design = design_columns(FRAME.drop("S3"), ["batch", "age", "sex"])
    assert design.names == ("batch=b10", "batch=b2", "age", "sex=m")
    expected = [[0, 1, 30.5, 1], [1, 0, 41, 0], [0, 0, 29, 1], [0, 0, 55, 1], [1, 0, 61, 0]]
    np.testing.assert_array_equal(design.matrix, expected)
    assert design.matrix.dtype == np.float64


def test_numbers_that_are_classes_have_their_levels_in_order_of_value():
    design = design_columns(FRAME, ["run"], {"run": "classes"})
    assert design.names == ("run=2", "run=10")
    assert design_columns(FRAME, ["run"], {"run": "number"}).matrix[:, 0].tolist() == [1, 2, 10, 1, 2, 10]


def test_a_column_that_may_be_either_is_asked_about_unless_it_makes_no_difference():
    frame = sheet_of(run=["1", "2", "3"] * 3, smoker=["0", "1", "1"] * 3)
    with pytest.raises(
        InputError, match=r"column 'run' .* '1', '2', '3', which may be classes or a number.*kinds"
    ):
        design_columns(frame, ["run"])
    both = [design_columns(frame, ["smoker"], kinds).matrix for kinds in ({}, {"smoker": "classes"})]
    np.testing.assert_array_equal(*both)


def test_columns_of_one_value_make_no_column_and_are_listed():
    design = design_columns(FRAME, ["one", "sex", "dose"])
    assert design.names == ("sex=m",)
    assert design.constant == ("one", "dose")
    assert design_columns(FRAME, []).matrix.shape == (6, 0)


def test_samples_without_a_value_are_named():
    assert missing_samples(FRAME, ["batch", "age"]) == {"age": ("S3",)}
    with pytest.raises(InputError, match=r"no value in column 'age' for 1 sample: 'S3'; fill"):
        design_columns(FRAME, ["batch", "age"])
    with pytest.raises(InputError, match=r"column 'age' for 1 sample: 'S3'"):
        group_codes(FRAME, "age")


@pytest.mark.parametrize("read", [design_columns, group_codes, missing_samples])
def test_columns_that_are_not_there_are_named(read):
    with pytest.raises(InputError, match=r"no column 'btach'; its columns are 'batch', 'age'"):
        read(FRAME, ["btach"])


def test_words_said_to_be_numbers_are_refused():
    with pytest.raises(
        InputError, match=r"column 'batch' .* said to be a number, but holds 'b1', 'b10', 'b2'"
    ):
        design_columns(FRAME, ["batch"], {"batch": "number"})
    with pytest.raises(
        InputError, match=r"column 'batch': its kind is 'class'; allowed: 'classes', 'number'"
    ):
        design_columns(FRAME, ["batch"], {"batch": "class"})


def test_groups_follow_the_stated_order_and_the_first_is_the_reference():
    groups = group_codes(FRAME, "batch", {"batch": ["b2", "b1", "b10"]})
    assert groups.levels == ("b2", "b1", "b10")
    assert groups.codes.tolist() == [0, 2, 0, 1, 1, 2]
    assert group_codes(FRAME, "run").levels == ("1", "2", "10")


def test_a_level_that_the_order_lacks_is_refused_and_one_that_is_absent_left_out():
    with pytest.raises(
        InputError, match=r"column 'batch' .* level 'b1', which order does not name; order has 'b2', 'b10'"
    ):
        group_codes(FRAME, "batch", {"batch": ["b2", "b10"]})
    assert group_codes(FRAME, "sex", {"sex": ["x", "m", "f"]}).levels == ("m", "f")


def test_cells_of_two_factors_are_groups_and_only_those_that_occur():
    groups = group_codes(FRAME, ["sex", "run"], {"sex": ["m", "f"]})
    assert groups.levels == ("m / 1", "m / 2", "f / 2", "f / 10")
    assert groups.codes.tolist() == [0, 2, 3, 0, 1, 3]
    assert groups.factors == ("sex", "run")


@given(
    st.lists(st.tuples(st.sampled_from("abc"), st.sampled_from("xyz")), min_size=1, max_size=20), st.randoms()
)
def test_codes_name_each_samples_own_cell_in_any_order_of_samples(cells, random):
    frame = sheet_of(one=[a for a, _ in cells], two=[b for _, b in cells])
    groups = group_codes(frame, ["one", "two"])
    assert [groups.levels[k] for k in groups.codes] == [f"{a} / {b}" for a, b in cells]
    shuffled = frame.sample(frac=1, random_state=random.randint(0, 999))
    again = group_codes(shuffled, ["one", "two"])
    assert again.levels == groups.levels
    assert dict(zip(shuffled.index, again.codes, strict=True)) == dict(
        zip(frame.index, groups.codes, strict=True)
    )


@given(st.lists(st.sampled_from(["b1", "b2", "b3", "b4"]), min_size=2, max_size=15))
def test_indicators_and_the_intercept_span_the_classes(labels):
    labels = [*labels, labels[0]]
    design = design_columns(sheet_of(batch=labels), ["batch"])
    full = pd.get_dummies(pd.Series(labels)).to_numpy(dtype=float)
    ours = np.column_stack([np.ones(len(labels)), design.matrix])
    assert ours.shape[1] == np.linalg.matrix_rank(ours) == full.shape[1]
    assert np.linalg.matrix_rank(np.column_stack([ours, full])) == full.shape[1]


def test_the_sheet_is_not_changed():
    before = FRAME.copy(deep=True)
    design_columns(FRAME, ["batch", "run"], {"run": "classes"})
    group_codes(FRAME, ["sex", "run"])
    pd.testing.assert_frame_equal(FRAME, before)


def test_a_nuisance_with_a_level_for_every_sample_is_refused():
    frame = sheet_of(tube=["a", "b", "c", "d"], pair=["p", "q", "p", "q"])
    with pytest.raises(InputError, match=r"column 'tube' .* a level of its own for each of 4 samples"):
        design_columns(frame, ["pair", "tube"])
