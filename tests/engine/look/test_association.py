"""R2 and p of components with sample columns, against other routes, and what cannot be tested."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import f_oneway, kstest, pearsonr
from statsmodels.api import OLS, add_constant

from workbench.engine.look.association import SampleColumn, associate, associate_rows
from workbench.engine.multiple import benjamini_hochberg
from workbench.engine.nuisance import Nuisance
from workbench.engine.pairs.subject_space import subject_space
from workbench.engine.subjects import SubjectDesign
from workbench.errors import NumericsError


def number(values: np.ndarray, name: str = "age") -> SampleColumn:
    return SampleColumn(name, "number", np.asarray(values, dtype=np.float64))


def classes(codes: np.ndarray, name: str = "day") -> SampleColumn:
    return SampleColumn(name, "classes", np.asarray(codes, dtype=np.float64), ("a", "b", "c"))


def test_a_number_is_a_squared_correlation_and_its_p() -> None:
    """Against scipy.stats.pearsonr, and adjusted R2 against statsmodels' least squares."""
    rng = np.random.default_rng(0)
    age, scores = rng.normal(size=30), rng.normal(size=(30, 4))
    scores[:, 1] += age
    found = associate(scores, [number(age)])
    for k in range(4):
        r, p = pearsonr(age, scores[:, k])
        assert found.r2[0, k] == pytest.approx(r**2, rel=1e-9)
        assert found.p[0, k] == pytest.approx(p, rel=1e-7)
        fit = OLS(scores[:, k], add_constant(age)).fit()
        assert found.r2_adjusted[0, k] == pytest.approx(fit.rsquared_adj, abs=1e-9)


def test_classes_are_an_analysis_of_variance() -> None:
    """Against scipy.stats.f_oneway; three classes of unequal size."""
    rng = np.random.default_rng(1)
    codes = np.repeat([0, 1, 2], [5, 9, 16])
    scores = rng.normal(size=(30, 3)) + codes[:, None] * [0.0, 0.5, 3.0]
    found = associate(scores, [classes(codes)])
    for k in range(3):
        assert found.p[0, k] == pytest.approx(
            f_oneway(*(scores[codes == c, k] for c in range(3))).pvalue, rel=1e-7
        )
    assert found.df.tolist() == [2]


def test_two_classes_as_numbers_or_as_classes_are_the_same() -> None:
    rng = np.random.default_rng(2)
    codes, scores = rng.integers(0, 2, 20), rng.normal(size=(20, 2))
    found = associate(scores, [classes(codes), number(codes)])
    assert_allclose(found.r2[0], found.r2[1], rtol=1e-9)
    assert_allclose(found.p[0], found.p[1], rtol=1e-9)


def test_missing_values_leave_out_their_samples_alone() -> None:
    rng = np.random.default_rng(3)
    age, scores = rng.normal(size=20), rng.normal(size=(20, 2))
    lacking = np.where(np.arange(20) < 5, np.nan, age)
    found = associate(scores, [number(lacking), number(age)])
    assert_allclose(found.r2[0], associate(scores[5:], [number(age[5:])]).r2[0], rtol=1e-10)
    assert found.n.tolist() == [15, 20]


def test_q_runs_over_the_whole_map_and_skips_what_is_untestable() -> None:
    rng = np.random.default_rng(4)
    found = associate(
        rng.normal(size=(20, 3)),
        [number(rng.normal(size=20)), number(np.ones(20)), classes(np.arange(20) % 3)],
    )
    assert np.isnan(found.p[1]).all()
    assert_allclose(found.q, benjamini_hochberg(found.p))


def test_a_component_that_is_the_column_has_a_p_above_zero() -> None:
    age = np.linspace(0.0, 1.0, 12)
    found = associate(np.column_stack([age]), [number(age)])
    assert found.r2[0, 0] == pytest.approx(1.0)
    assert 0.0 < found.p[0, 0] < 1e-50


def test_p_is_uniform_without_association() -> None:
    rng = np.random.default_rng(5)
    p = associate(rng.normal(size=(25, 2000)), [classes(np.arange(25) % 3)]).p[0]
    assert kstest(p, "uniform").pvalue > 0.01


@pytest.mark.parametrize(
    ("column", "reason"),
    [
        (number([1.0, 2.0, 3.0, np.nan, np.nan, np.nan, np.nan, np.nan]), "only 3 samples have a value"),
        (number(np.ones(8)), "one value in all samples"),
        (classes(np.arange(8)), "8 classes among 8 samples: nearly one each"),
        (classes([0, 1, 2, 3, 4, 5, 6, 6]), "7 classes among 8 samples: nearly one each"),
    ],
)
def test_what_cannot_be_tested_is_said(column: SampleColumn, reason: str) -> None:
    found = associate(np.random.default_rng(6).normal(size=(8, 2)), [column])
    assert found.untestable == (reason,)
    assert np.isnan(found.r2).all()


def test_a_column_of_other_samples_is_refused() -> None:
    with pytest.raises(NumericsError, match="column 'age' has 5 values for 8 samples"):
        associate(np.zeros((8, 2)), [number(np.arange(5))])


def test_rows_that_are_the_samples_give_the_plain_figures() -> None:
    rng = np.random.default_rng(7)
    columns = [number(rng.normal(size=20)), classes(np.arange(20) % 3)]
    scores = rng.normal(size=(20, 4))
    plain, mapped = (
        associate(scores, columns),
        associate_rows(scores - scores.mean(axis=0), columns, np.eye(20), Nuisance.of(None, 20)),
    )
    assert_allclose(mapped.p, plain.p, rtol=1e-10)
    assert_allclose(mapped.r2_adjusted, plain.r2_adjusted, atol=1e-12)


def test_between_visits_what_a_subject_has_all_the_time_has_no_part() -> None:
    rng = np.random.default_rng(8)
    design = SubjectDesign.of(np.repeat(np.arange(20), 3), np.tile([0, 1, 2], 20))
    space = subject_space((rng.normal(size=(60, 300)),), design, None, "visits")
    age, dose = rng.normal(size=20)[design.subject], rng.normal(size=60)
    scores = space.nuisance.residuals(space.matrix @ dose)[:, None]
    missing = np.where(np.arange(60) == 5, np.nan, dose)
    found = associate_rows(scores, [number(age), number(dose), number(missing)], space.matrix, space.nuisance)
    assert found.untestable == ("nothing of it is left", "", "a sample has no value")
    assert found.r2[1, 0] == pytest.approx(1.0)
