"""Designs with several samples of a subject are told apart, and what is computed within them is right."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from workbench.engine.subjects import (
    SubjectDesign,
    centred,
    differences,
    subject_labels,
    subject_means,
    whole_subject_folds,
)
from workbench.errors import NumericsError


def test_each_kind_of_design_is_told_with_its_reason() -> None:
    two, three = np.repeat(np.arange(4), 2), np.repeat(np.arange(4), 3)
    cases = [
        (np.arange(5), None, "single", "one sample for each of 5 subjects"),
        (two, np.tile([0, 7], 4), "pairs", "two ordered samples for each of 4 subjects"),
        (np.append(two, 9), np.append(np.tile([0, 7], 4), 0), "pairs", "1 of 5 with one alone"),
        (three, np.tile([0, 7, 14], 4), "visits", "up to 3 ordered visits of 4 subjects"),
        (two, None, "replicates", "without an order"),
    ]
    for subjects, times, kind, reason in cases:
        design = SubjectDesign.of(subjects, times)
        assert design.kind == kind
        assert reason in design.reason


@given(seed=st.integers(0, 2**32))
@settings(max_examples=40, deadline=None)
def test_nothing_depends_on_the_order_of_the_rows(seed: int) -> None:
    rng = np.random.default_rng(seed)
    subjects = np.repeat(np.array(["a", "b", "c", "d"]), 2)
    times, x = np.tile([3.0, 8.0], 4), rng.normal(size=(8, 3))
    order = rng.permutation(8)
    one, other = SubjectDesign.of(subjects, times), SubjectDesign.of(subjects[order], times[order])
    assert_allclose(differences(other, x[order]), differences(one, x), atol=1e-15)
    assert_allclose(subject_means(other, x[order]), subject_means(one, x), atol=1e-15)
    assert_allclose(centred(other, x[order]), centred(one, x)[order], atol=1e-15)


def test_centring_is_the_regression_on_the_subjects_and_differences_are_twice_the_half() -> None:
    rng = np.random.default_rng(2)
    subjects, x = np.repeat(np.arange(5), 2), rng.normal(size=(10, 4))
    design = SubjectDesign.of(subjects, np.tile([0, 1], 5))
    indicators = (subjects[:, None] == np.arange(5)).astype(float)
    fitted = indicators @ np.linalg.lstsq(indicators, x, rcond=None)[0]
    assert_allclose(centred(design, x), x - fitted, atol=1e-12)
    assert_allclose(differences(design, x), 2.0 * centred(design, x)[1::2], atol=1e-12)
    assert_allclose(subject_means(design, x)[subjects], fitted, atol=1e-12)


def test_what_a_subject_has_all_the_time_leaves_changes_alone() -> None:
    rng = np.random.default_rng(3)
    subjects, x = np.repeat(np.arange(6), 2), rng.normal(size=(12, 2))
    design = SubjectDesign.of(subjects, np.tile([0, 1], 6))
    own = rng.normal(scale=100.0, size=(6, 2))[subjects]
    assert_allclose(differences(design, x + own), differences(design, x), atol=1e-10)
    assert_allclose(subject_means(design, x + own) - subject_means(design, x), own[::2], atol=1e-10)


def test_times_of_a_schedule_are_visits_and_scattered_times_are_places() -> None:
    subjects = np.repeat(np.arange(4), 3)
    visits = SubjectDesign.of(subjects[[0, 1, 3, 5, 6, 7, 8]], np.array([0, 7, 0, 14, 0, 7, 14]))
    assert visits.scheduled
    assert_array_equal(visits.visit, [0, 1, 0, 2, 0, 1, 2])
    assert np.unique(visits.pattern).size == 3
    scattered = SubjectDesign.of(subjects, np.arange(12) ** 1.5)
    assert not scattered.scheduled
    assert_array_equal(scattered.visit, np.tile([0, 1, 2], 4))
    assert np.unique(scattered.pattern).size == 1


def test_a_part_of_the_samples_keeps_its_subjects_together() -> None:
    subjects, times = np.repeat(np.arange(6), 3), np.tile([0, 1, 2], 6)
    design = SubjectDesign.of(subjects, times)
    rows = np.flatnonzero(subjects < 4)
    assert design.take(rows).kind == "visits"
    pairs = design.take(times != 1)
    assert pairs.kind == "pairs"
    assert_array_equal(pairs.pairs[:2], [[0, 1], [2, 3]])
    assert_array_equal(design.repeated, True)
    assert not design.take(times == 1).repeated.any()


def test_folds_keep_subjects_whole_and_spread_their_labels() -> None:
    subjects = np.random.default_rng(4).permutation(np.repeat(np.arange(20), 3))
    labels = np.where(subjects < 10, "a", "b")
    design = SubjectDesign.of(subjects)
    folds = whole_subject_folds(design, labels, 5, 1)
    assert_array_equal(np.sort(np.concatenate([test for _, test in folds])), np.arange(60))
    for train, test in folds:
        assert not np.intersect1d(subjects[train], subjects[test]).size
        assert np.count_nonzero(labels[test] == "a") == 6


def test_labels_that_change_within_a_subject_are_a_label_of_their_own() -> None:
    design = SubjectDesign.of(np.array([0, 0, 1, 1, 2, 2]))
    codes = subject_labels(design, np.array([0, 1, 1, 0, 1, 1]))
    assert codes[0] == codes[1] != codes[2]
    assert_array_equal(subject_labels(design, None), 0)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: SubjectDesign.of(np.array([0, 0]), np.array([1.0, np.nan])), "sample 1 .* has no time"),
        (
            lambda: SubjectDesign.of(np.array(["p", "p"]), np.array([3, 3])),
            "subject p has two samples at time 3",
        ),
        (lambda: SubjectDesign.of(np.array([0, 0]), np.array([1])), "1 times for 2 samples"),
        (lambda: differences(SubjectDesign.of(np.arange(3)), np.ones((3, 1))), "need two ordered samples"),
        (lambda: centred(SubjectDesign.of(np.arange(3)), np.ones((2, 1))), "one row for each sample"),
        (
            lambda: whole_subject_folds(SubjectDesign.of(np.array([0, 0, 1])), None, 3, 0),
            "3 folds for 2 subjects",
        ),
    ],
)
def test_what_makes_no_design_is_refused(call, message: str) -> None:
    with pytest.raises(NumericsError, match=message):
        call()
