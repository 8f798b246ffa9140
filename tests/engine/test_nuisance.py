"""Nuisance is removed exactly, whatever the columns look like, and learnt from training rows alone."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.nuisance import Nuisance, aliased, fit_residuals, standardise
from workbench.errors import NumericsError


def _columns(seed: int, n: int = 20, c: int = 3) -> np.ndarray:
    return np.random.default_rng(seed).normal(size=(n, c))


@given(seed=st.integers(0, 10_000), n=st.integers(3, 30), c=st.integers(0, 6))
@settings(max_examples=40, deadline=None)
def test_basis_is_orthonormal_and_spans_the_columns(seed: int, n: int, c: int) -> None:
    columns = np.random.default_rng(seed).integers(0, 3, size=(n, c)).astype(float)
    nuisance = Nuisance.of(columns, n)
    design = np.column_stack([np.ones(n), columns])
    assert nuisance.rank == np.linalg.matrix_rank(design)
    assert_allclose(nuisance.basis.T @ nuisance.basis, np.eye(nuisance.rank), atol=1e-12)
    assert_allclose(nuisance.residuals(design), 0.0, atol=1e-12)


def test_residuals_are_those_of_least_squares() -> None:
    columns, x = _columns(1), _columns(2, c=5) + 1e3
    design = np.column_stack([np.ones(20), columns])
    expected = x - design @ np.linalg.lstsq(design, x, rcond=None)[0]
    assert_allclose(Nuisance.of(columns, 20).residuals(x), expected, atol=1e-10)
    assert_allclose(Nuisance.of(columns, 20).residuals(x[:, 0]), expected[:, 0], atol=1e-10)


def test_residuals_stay_residuals_and_forget_scale_and_order_of_the_columns() -> None:
    columns, x = _columns(3), _columns(4, c=2)
    residuals = Nuisance.of(columns, 20).residuals(x)
    assert_allclose(Nuisance.of(columns, 20).residuals(residuals), residuals, atol=1e-12)
    moved = Nuisance.of(1e6 * columns[:, ::-1] - 5e7, 20)
    assert_allclose(moved.residuals(x), residuals, atol=1e-8)


def test_a_column_of_years_is_not_taken_for_a_constant() -> None:
    years = np.array([[2019.0], [2020.0], [2021.0], [2020.0]])
    assert Nuisance.of(years, 4).rank == 2
    assert Nuisance.of(np.full((4, 1), 0.1), 4).rank == 1


def test_a_gap_makes_only_its_own_feature_missing() -> None:
    x = _columns(5, c=3)
    holed = x.copy()
    holed[4, 1] = np.nan
    residuals = Nuisance.of(_columns(6), 20).residuals(holed)
    assert np.isnan(residuals[:, 1]).all()
    assert_allclose(residuals[:, [0, 2]], Nuisance.of(_columns(6), 20).residuals(x)[:, [0, 2]], atol=1e-13)


def test_aliased_columns_are_named_once() -> None:
    batch = np.array([0.0, 0, 0, 1, 1, 1])
    run = np.array([1.0, 2, 3, 1, 2, 3])
    columns = np.column_stack([batch, run, 1 - batch, batch + 2 * run, np.ones(6)])
    assert aliased(columns, ["group", "run", "batch", "batch", "site"]) == ("batch", "site")
    assert aliased(columns[:, :2], ["group", "run"]) == ()


def test_standardise_gives_unit_variance_at_its_degrees_of_freedom() -> None:
    x = np.column_stack([_columns(7, c=2), np.full(20, 3.3), _columns(8, c=1)[:, 0]])
    nuisance = Nuisance.of(_columns(8, c=1), 20)
    block = standardise(x, nuisance)
    assert_array_equal(block.kept, [0, 1])
    assert_array_equal(block.dropped, [2, 3])
    assert_allclose(np.square(block.values).sum(axis=0), 20 - 2, rtol=1e-12)
    assert_allclose(block.values * block.scale, nuisance.residuals(x)[:, :2], atol=1e-12)


def test_training_residuals_are_those_of_the_training_rows_and_do_not_see_the_others() -> None:
    columns, x = _columns(9), _columns(10, c=4)
    fitted = fit_residuals(columns[:15], x[:15])
    assert_allclose(fitted.transform(columns[:15], x[:15]), Nuisance.of(columns[:15], 15).residuals(x[:15]))
    design = np.column_stack([np.ones(20), columns])
    coefficients = np.linalg.lstsq(design[:15], x[:15], rcond=None)[0]
    assert_allclose(fitted.transform(columns[15:], x[15:]), x[15:] - design[15:] @ coefficients, atol=1e-10)


def test_training_scale_is_the_unit_of_the_other_rows() -> None:
    columns, x = _columns(11, c=1), _columns(12, c=3)
    x[:15, 1] = 4.0
    fitted = fit_residuals(columns[:15], x[:15])
    assert_array_equal(fitted.varies, [True, False, True])
    train = fitted.standardised(columns[:15], x[:15])
    assert_allclose(np.square(train).sum(axis=0), 15 - 2, rtol=1e-12)
    expected = fitted.transform(columns, x)[15:, [0, 2]] / fitted.scale[[0, 2]]
    assert_allclose(fitted.standardised(columns[15:], x[15:]), expected)


def test_an_aliased_training_column_changes_nothing() -> None:
    columns, x = _columns(13, c=2), _columns(14, c=3)
    doubled = np.column_stack([columns, columns @ [2.0, -1.0] + 3.0])
    once, twice = fit_residuals(columns[:15], x[:15]), fit_residuals(doubled[:15], x[:15])
    assert twice.rank == once.rank == 3
    assert_allclose(twice.transform(doubled[15:], x[15:]), once.transform(columns[15:], x[15:]), atol=1e-10)


def test_a_level_that_training_never_saw_cannot_be_estimated() -> None:
    batch = np.eye(3)[[0, 0, 1, 1, 0, 1, 2, 1]][:, 1:]
    fitted = fit_residuals(batch[:6], _columns(15, n=6, c=2))
    assert_array_equal(fitted.estimable(batch, 8), [True] * 6 + [False, True])
    assert_array_equal(fit_residuals(None, _columns(15, n=6)).estimable(None, 2), [True, True])


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: Nuisance.of(np.ones((3, 1)), 4), "one row for each of the 4 samples"),
        (lambda: Nuisance.of(np.array([[1.0], [np.nan]]), 2), "nuisance column 0 .* row 1"),
        (lambda: Nuisance.of(None, 0), "at least 1 is needed"),
        (lambda: Nuisance.of(None, 4).residuals(np.ones((3, 2))), "3 rows and the nuisance 4"),
        (lambda: aliased(np.ones((3, 2)), ["a"]), "one name per column"),
        (lambda: standardise(np.ones((3, 2))), "none of the 2 features has variance left"),
        (lambda: standardise(np.array([[1.0, np.inf], [2.0, 3.0]])), "row 0, column 1"),
        (lambda: standardise(np.ones(3)), "samples x features"),
        (lambda: fit_residuals(np.eye(3)[:, :2], _columns(1, n=3)), "leave no degree of freedom"),
        (
            lambda: fit_residuals(None, _columns(1)).transform(np.ones((2, 1)), np.ones((2, 3))),
            "learnt with 0",
        ),
    ],
)
def test_what_cannot_be_done_is_refused_with_the_place(call, message: str) -> None:
    with pytest.raises(NumericsError, match=message):
        call()


def test_inputs_are_not_changed() -> None:
    columns, x = _columns(16), _columns(17)
    before = columns.copy(), x.copy()
    standardise(x, Nuisance.of(columns, 20))
    fit_residuals(columns, x).standardised(columns, x)
    assert_array_equal(columns, before[0])
    assert_array_equal(x, before[1])
