"""Copies of samples and of features, and what chance makes equal."""

from __future__ import annotations

import numpy as np
import pytest
from checks.studies import SMALL_THREE, checked, small_study

from workbench.checks.duplicates import check_duplicates, equal_features, near_pairs, same_share


def noise(n, p, seed=0):
    return np.random.default_rng(seed).normal(size=(n, p))


@pytest.mark.parametrize("p", [5, 20, 40, 200, 2000])
def test_no_two_samples_of_noise_are_near(p):
    assert [near_pairs(noise(40, p, seed)) for seed in range(20)] == [[]] * 20


@pytest.mark.parametrize("share", [0.0, 0.1, 0.3])
def test_a_near_copy_is_near_and_the_strong_clusters_around_it_are_not(share):
    x = noise(30, 400) + 3.0 * noise(3, 400, 1)[np.arange(30) % 3]
    x[7] = x[22] + share * noise(1, 400, 2)
    assert near_pairs(x / x.std(axis=0)) == [(7, 22)]


def test_a_study_measured_twice_throughout_is_found_as_well():
    x = noise(12, 300)
    both = np.vstack([x, x + 0.2 * noise(12, 300, 1)])
    assert sorted(near_pairs(both)) == [(k, k + 12) for k in range(12)]


def test_three_copies_are_three_pairs():
    x = noise(20, 300)
    x[[4, 9]] = x[1] + 0.1 * noise(2, 300, 1)
    assert sorted(near_pairs(x)) == [(1, 4), (1, 9), (4, 9)]


@pytest.mark.parametrize("change", [lambda x: x, lambda x: 0.4 * x, lambda x: x + 2.5])
def test_equal_scaled_and_shifted_rows_are_the_same(change):
    x = 10 + noise(8, 50)
    x[3] = change(x[5])
    assert same_share(x, 3, 5) == 1.0
    assert same_share(x, 3, 4) < 0.2


def test_two_visits_of_one_subject_are_no_copies():
    study = small_study(n=40, visits=2, subject_share=0.97)
    found = check_duplicates(checked(study, more='subject = "subject"'))
    assert [finding for finding in found if finding.check == "duplicated_samples"] == []


def test_equal_features_are_found_and_rare_counts_that_agree_by_chance_are_not():
    rng = np.random.default_rng(1)
    x = np.column_stack([rng.poisson(50, (24, 30)), rng.random((24, 300)) < 0.04]).astype(float)
    x[:, 7] = x[:, 3]
    assert equal_features(x) == [(3, 7)]
    x[5, [3, 7]] = np.nan
    assert equal_features(x) == [(3, 7)]
    x[5, 7] = 1.0
    assert equal_features(x) == []


def test_features_that_cannot_vary_are_counted_by_their_reason():
    study = small_study()
    table = study.blocks["metabolites"].copy()
    table.iloc[:, 0], table.iloc[:, 1], table.iloc[:, 2] = np.nan, 5.0, 0.0
    found = check_duplicates(checked(study, tables={"metabolites": table}))
    (note,) = [finding for finding in found if finding.id == "constant_features-metabolites"]
    assert set(note.features) == set(table.columns[:3])
    assert "1 without any value, 1 zero throughout, 1 with one other value" in note.what


def test_blocks_of_few_and_coarse_features_raise_no_alarm():
    found = check_duplicates(checked(small_study(n=60, blocks=SMALL_THREE)))
    assert [finding for finding in found if finding.severity != "note"] == []
