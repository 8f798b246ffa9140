"""Draws belong to cells: uniform, independent, and the same whoever else is there."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_array_equal
from scipy import stats

from workbench.prepare.draws import uniform_table

SAMPLES = [f"S{i}" for i in range(200)]
FEATURES = [f"m/z {i}.25" for i in range(200)]
names = st.lists(st.text(max_size=5), min_size=1, max_size=6, unique=True)


@given(names, names, st.integers(0, 2**63), st.data())
def test_a_cell_keeps_its_draw_in_any_company(samples, features, seed, data) -> None:
    whole = uniform_table(seed, samples, features, "tail")
    some = data.draw(st.permutations(range(len(samples))))[: max(1, len(samples) // 2)]
    part = uniform_table(seed, [samples[i] for i in some], features[::-1], "tail")
    assert_array_equal(part, whole[some][:, ::-1])
    assert ((whole > 0) & (whole < 1)).all()


def test_draws_are_uniform_and_unrelated_along_rows_columns_seeds_and_purposes() -> None:
    draws = uniform_table(1, SAMPLES, FEATURES, "tail")
    assert stats.kstest(draws.ravel(), "uniform").pvalue > 0.001
    others = [uniform_table(2, SAMPLES, FEATURES, "tail"), uniform_table(1, SAMPLES, FEATURES, "lots")]
    others += [np.roll(draws, 1, axis=axis) for axis in (0, 1)]
    limit = 4.5 / np.sqrt(draws.size)
    for other in others:
        assert abs(np.corrcoef(draws.ravel(), other.ravel())[0, 1]) < limit


def test_means_of_rows_and_columns_scatter_as_they_should() -> None:
    draws = uniform_table(3, SAMPLES, FEATURES, "tail")
    for axis in (0, 1):
        squares = np.sum((draws.mean(axis=axis) - 0.5) ** 2) * 12 * 200
        assert 0.001 < stats.chi2(200).cdf(squares) < 0.999


def test_joined_names_do_not_collide() -> None:
    assert uniform_table(1, ["a"], ["bc"], "t") != uniform_table(1, ["ab"], ["c"], "t")
    assert uniform_table(1, ["x"], ["y"], "t") != uniform_table(1, ["y"], ["x"], "t")
