"""Normalisation against worked examples, other routes and planted dilutions."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from prepare.measured import step_table
from scipy.stats import gmean

from workbench.prepare.quotients import Quotients
from workbench.prepare.size_factors import SizeFactors, geometric_means, median_of_ratios
from workbench.prepare.steps import FitContext

NO_GROUPS = FitContext(None, 1)


def test_size_factors_of_an_example_worked_by_hand() -> None:
    """From the definition, Anders & Huber 2010, Genome Biology 11:R106, equation 5.

    Geometric means (2 4 8)^(1/3) = 4, (1 1 27)^(1/3) = 3, (10 20 5)^(1/3) = 10. Ratios of the first sample 2/4,
    1/3, 10/10, median 1/2; of the second 1, 1/3, 2, median 1; of the third 2, 9, 1/2, median 2.
    """
    counts = np.array([[2.0, 1.0, 10.0], [4.0, 1.0, 20.0], [8.0, 27.0, 5.0]])
    assert_allclose(geometric_means(counts), [4.0, 3.0, 10.0], rtol=1e-12)
    assert_allclose(median_of_ratios(counts, geometric_means(counts)), [0.5, 1.0, 2.0], rtol=1e-12)


def test_size_factors_by_another_route() -> None:
    """The definition written out with scipy's geometric mean, on counts without zeros."""
    rng = np.random.default_rng(1)
    counts = rng.negative_binomial(5, 0.01, (9, 500)) + 1.0
    expected = [np.median(sample / gmean(counts, axis=0)) for sample in counts]
    table = step_table(counts)
    assert_allclose(SizeFactors().fit(table, NO_GROUPS).factors(table), expected, rtol=1e-10)


def test_features_with_zeros_take_no_part_where_enough_lack_them() -> None:
    """A feature with a zero has a geometric mean of zero and no ratio (Anders & Huber 2010)."""
    rng = np.random.default_rng(2)
    counts = rng.negative_binomial(5, 0.01, (6, 300)) + 1.0
    counts[rng.integers(0, 6, 100), np.arange(100)] = 0.0
    whole = counts[:, 100:]
    expected = [np.median(sample / gmean(whole, axis=0)) for sample in whole]
    table = step_table(counts)
    assert_allclose(SizeFactors().fit(table, NO_GROUPS).factors(table), expected, rtol=1e-10)


@pytest.mark.parametrize("held_out", [False, True])
def test_quotient_normalisation_recovers_planted_dilutions(held_out: bool) -> None:
    """1,000 features of log sd 0.3: median error at most 2 %, 95 % of the samples within 4 %.

    The method: Dieterle et al. 2006, Analytical Chemistry 78:4281-4290. Expected by theory: the standard error of
    a median of 1,000 logs, 1.2533 x 0.3 / sqrt(1000) = 1.2 %.
    """
    rng = np.random.default_rng(3)
    dilutions = np.exp(rng.uniform(np.log(0.2), np.log(5.0), 240))
    values = rng.lognormal(8, 2, 1000) * np.exp(rng.normal(0, 0.3, (240, 1000))) * dilutions[:, None]
    fitted = Quotients().fit(step_table(values[:120]), NO_GROUPS)
    part = slice(120, 240) if held_out else slice(0, 120)
    found = np.log(fitted.factors(step_table(values[part])) / dilutions[part])
    reference = np.median(np.log(fitted.factors(step_table(values[:120])) / dilutions[:120]))
    errors = np.abs(np.expm1(found - reference))
    assert np.median(errors) <= 0.02
    assert np.mean(errors <= 0.04) >= 0.95
