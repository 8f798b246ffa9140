"""Normalisation against worked examples, other routes and planted dilutions."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from prepare.measured import step_table
from scipy.stats import gmean, rankdata

from workbench.prepare.beta import m_values
from workbench.prepare.compositions import centred_log_ratios, replace_zeros
from workbench.prepare.quotients import Quotients
from workbench.prepare.read_scales import TrimmedMeans, UpperQuartile, trimmed_mean_of_m
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


def trimmed_mean_as_written(counts: np.ndarray, reference: np.ndarray) -> float:
    """Robinson & Oshlack 2010, Genome Biology 11:R25, Methods, feature by feature."""
    n_k, n_r = counts.sum(), reference.sum()
    rows = []
    for k, r in zip(counts, reference, strict=True):
        if k > 0 and r > 0:
            m = np.log2((k / n_k) / (r / n_r))
            a = 0.5 * np.log2((k / n_k) * (r / n_r))
            rows.append((m, a, (n_k - k) / (n_k * k) + (n_r - r) / (n_r * r)))
    m, a, variance = np.array(rows).T
    low_m, low_a = np.floor(0.3 * len(m)) + 1, np.floor(0.05 * len(m)) + 1
    kept = (rankdata(m) >= low_m) & (rankdata(m) <= len(m) + 1 - low_m)
    kept &= (rankdata(a) >= low_a) & (rankdata(a) <= len(a) + 1 - low_a)
    return float(2 ** (np.sum(m[kept] / variance[kept]) / np.sum(1 / variance[kept])))


def composition_bias(seed: int, share: float) -> tuple[np.ndarray, np.ndarray]:
    """Return counts of two samples; of the second, a tenth of the features take ``share`` of the reads."""
    rng = np.random.default_rng(seed)
    rates = rng.lognormal(4, 1.2, 2000)
    other = rates.copy()
    up = rng.choice(2000, 200, replace=False)
    other[up] *= share / (1 - share) * (rates.sum() - rates[up].sum()) / rates[up].sum()
    depth = 400_000
    return rng.poisson(depth * rates / rates.sum()), rng.poisson(depth * other / other.sum())


def test_trimmed_mean_of_m_by_its_definition() -> None:
    one, other = composition_bias(4, 0.4)
    expected = trimmed_mean_as_written(other, one)
    found = trimmed_mean_of_m(other.astype(float), other.sum(), one.astype(float), one.sum())
    assert_allclose(found, expected, rtol=0.002)


@pytest.mark.parametrize("share", [0.1, 0.4, 0.6])
def test_trimmed_mean_of_m_recovers_simulated_composition_bias(share: float) -> None:
    """Reads left for the unchanged nine tenths: their factor is their share here over their share there."""
    one, other = composition_bias(5, share)
    ratio = np.median((other / other.sum())[one > 50] / (one / one.sum())[one > 50])
    found = trimmed_mean_of_m(other.astype(float), other.sum(), one.astype(float), one.sum())
    assert_allclose(found, ratio, rtol=0.03)
    table = step_table(np.vstack([one, other]))
    factors = TrimmedMeans().fit(table, NO_GROUPS).factors(table)
    assert_allclose(factors[1] / factors[0], ratio * other.sum() / one.sum(), rtol=0.03)


def test_upper_quartiles_by_the_definition() -> None:
    """Bullard, Purdom, Hansen & Dudoit 2010, BMC Bioinformatics 11:94: the 75 % quantile over features with reads."""
    rng = np.random.default_rng(6)
    counts = np.column_stack([rng.negative_binomial(3, 0.02, (8, 400)), np.zeros((8, 50))])
    quartiles = np.percentile(counts[:, :400], 75, axis=1)
    table = step_table(counts)
    assert_allclose(
        UpperQuartile().fit(table, NO_GROUPS).factors(table), quartiles / gmean(quartiles), rtol=1e-12
    )


def test_centred_log_ratios_of_a_published_example() -> None:
    """The documented example of ``clr`` in scikit-bio's composition module; numbers from memory."""
    parts = np.array([[0.1, 0.3, 0.4, 0.2]])
    expected = [[-0.79451346, 0.30409883, 0.5917809, -0.10136628]]
    assert_allclose(centred_log_ratios(parts), expected, atol=1e-8)


def test_multiplicative_replacement_of_a_published_example() -> None:
    """The documented example of multiplicative replacement in scikit-bio (limit 1 / 16); numbers from memory.

    The method: Martin-Fernandez, Barcelo-Vidal & Pawlowsky-Glahn 2003, Mathematical Geology 35:253-278.
    """
    parts = np.array([[0.2, 0.4, 0.4, 0.0], [0.0, 0.5, 0.5, 0.0]])
    expected = [[0.1875, 0.375, 0.375, 0.0625], [0.0625, 0.4375, 0.4375, 0.0625]]
    assert_allclose(replace_zeros(parts, 1 / 16), expected, rtol=1e-12)


def test_log_ratios_of_compositions_are_aitchisons_distance() -> None:
    """Aitchison 1986: the distance over all pairs of log-ratios equals that of centred log-ratios, times p."""
    x, y = np.random.default_rng(7).lognormal(0, 1, (2, 6))
    pairs = np.subtract.outer(np.log(x), np.log(x)) - np.subtract.outer(np.log(y), np.log(y))
    centred = centred_log_ratios(np.vstack([x, y]))
    assert_allclose(np.sum((centred[0] - centred[1]) ** 2), np.sum(pairs**2) / (2 * 6), rtol=1e-12)


def test_m_values_of_intensities() -> None:
    """Du et al. 2010, BMC Bioinformatics 11:587: M = log2(meth. / unmeth.), 0.2 is -2 (from memory)."""
    methylated, unmethylated = np.array([2000.0, 5000.0, 9000.0]), np.array([8000.0, 5000.0, 1000.0])
    beta = methylated / (methylated + unmethylated)
    assert_allclose(m_values(beta, 1e-9), np.log2(methylated / unmethylated), atol=1e-6)
    assert_allclose(m_values(np.array([0.2, 0.8]), 1e-9), [-2.0, 2.0], atol=1e-6)
    with_one = np.log2((methylated + 1) / (unmethylated + 1))
    assert_allclose(m_values(beta, 1e-4), with_one, rtol=0, atol=1e-12)
