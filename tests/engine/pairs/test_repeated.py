"""Changes within subjects are screened as what they are: not independent, and with a course in common."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats

from workbench.engine import (
    BlockPair,
    Nuisance,
    SubjectDesign,
    differences,
    screen_pairs,
    subject_means,
)
from workbench.engine.pairs.repeated import course_damping, screen_repeated, without_subject
from workbench.engine.pairs.subject_space import by_visit, subject_space
from workbench.errors import NumericsError


def _course(rng: np.random.Generator, fall: float, subjects: int, visits: int, p: int) -> np.ndarray:
    """Stationary first-order courses of each subject, shape (subjects visits, p)."""
    new = rng.normal(size=(subjects, visits, p))
    for k in range(1, visits):
        new[:, k] = fall * new[:, k - 1] + np.sqrt(1.0 - fall**2) * new[:, k]
    return new.reshape(-1, p)


def _study(seed: int, fall: float, subjects: int = 15, visits: int = 4, p: int = 60, q: int = 40):
    rng = np.random.default_rng(seed)
    subject, visit = np.repeat(np.arange(subjects), visits), np.tile(np.arange(visits), subjects)
    x, y = (
        _course(rng, fall, subjects, visits, m)
        + 3.0 * rng.normal(size=(subjects, m))[subject]
        + 2.0 * np.outer(visit, rng.normal(size=m))
        for m in (p, q)
    )
    return SubjectDesign.of(subject, visit), x, y


def test_pairs_are_the_correlations_of_differences() -> None:
    design, x, y = _study(1, 0.5, visits=2)
    y[:, 3] += 4.0 * x[:, 5]
    age = np.random.default_rng(2).normal(size=(30, 1))
    ours = screen_repeated([BlockPair("a", x, y, age)], [design], "visits").lookup(
        0, np.arange(40), np.arange(40)
    )
    plain = screen_pairs(differences(design, x), differences(design, y), nuisance=differences(design, age))
    theirs = plain.lookup(np.arange(40), np.arange(40))
    assert_allclose(ours.r, theirs.r, atol=1e-12)
    assert_allclose(ours.p, theirs.p, rtol=1e-9)


def test_replicates_without_order_are_the_regression_on_the_subjects() -> None:
    _, x, y = _study(3, 0.0)
    subject = np.repeat(np.arange(15), 4)
    indicators = np.equal.outer(subject, np.arange(1, 15)).astype(float)
    design = SubjectDesign.of(subject)
    ours = screen_repeated([BlockPair("a", x, y)], [design], "visits").lookup(0, np.arange(9), 0)
    theirs = screen_pairs(x, y, nuisance=indicators).lookup(np.arange(9), 0)
    assert_allclose(ours.r, theirs.r, atol=1e-12)
    assert_allclose(ours.p, theirs.p, rtol=1e-9)


def test_a_change_in_both_layers_is_found_and_a_difference_between_subjects_is_not_taken_for_one() -> None:
    design, x, y = _study(4, 0.6, subjects=20)
    y[:, 7] += 2.0 * x[:, 3]
    between = 5.0 * np.random.default_rng(5).normal(size=(20, 1))[design.subject]
    x[:, [11]] += between
    y[:, [13]] += between
    visits = screen_repeated([BlockPair("a", x, y)], [design], "visits")
    assert (3, 7) in zip(visits.i.tolist(), visits.j.tolist(), strict=True)
    assert (11, 13) not in zip(visits.i.tolist(), visits.j.tolist(), strict=True)
    subjects = screen_repeated([BlockPair("a", x, y)], [design], "subjects")
    assert (11, 13) in zip(subjects.i.tolist(), subjects.j.tolist(), strict=True)


@pytest.mark.parametrize("fall", [0.0, 0.5, 0.9])
def test_p_is_uniform_under_a_common_course_and_autocorrelation(fall: float) -> None:
    p = []
    for seed in range(60):
        design, x, y = _study(100 + seed, fall, p=30, q=20)
        screen = screen_repeated([BlockPair("a", x, y)], [design], "visits")
        p.append(screen.lookup(0, np.arange(20), np.arange(20)).p)
    flat = np.concatenate(p)
    assert stats.kstest(flat, "uniform").pvalue > 0.001
    assert abs(np.mean(flat < 0.05) - 0.05) < 0.02


def test_whitening_turns_first_order_courses_into_independent_rows() -> None:
    design, x, y = _study(6, 0.8, subjects=30, p=2000, q=2000)
    space = subject_space((x, y), design, None, "visits")
    rows = space.nuisance.residuals(space.matrix @ x)[:, :]
    visits = space.whitened @ x
    visits -= visits.reshape(30, 3, -1).mean(axis=0)[np.tile(np.arange(3), 30)]
    own = np.cov(visits.reshape(30, 3, -1).transpose(1, 0, 2).reshape(3, -1))
    assert_allclose(own / np.trace(own) * 3, np.eye(3), atol=0.05)
    assert_allclose(rows.sum(axis=0), 0.0, atol=1e-9)


def test_subjects_means_are_screened_as_one_sample_each() -> None:
    design, x, y = _study(7, 0.5)
    ours = screen_repeated([BlockPair("a", x, y)], [design], "subjects")
    theirs = screen_pairs(subject_means(design, x), subject_means(design, y))
    assert_allclose(ours.lookup(0, np.arange(9), 4).r, theirs.lookup(np.arange(9), 4).r, atol=1e-12)
    assert ours.tested == (2400,)


def test_a_visit_that_some_subjects_lack_makes_no_difference_between_their_means() -> None:
    rng = np.random.default_rng(8)
    subject, visit = np.repeat(np.arange(30), 3), np.tile(np.arange(3), 30)
    kept = (visit < 2) | (subject % 2 == 0)
    subject, visit = subject[kept], visit[kept]
    x, y = (rng.normal(size=(kept.sum(), 40)) + 10.0 * np.outer(visit, rng.normal(size=40)) for _ in range(2))
    design = SubjectDesign.of(subject, visit)
    assert screen_repeated([BlockPair("a", x, y)], [design], "subjects").n_edges == 0
    assert screen_pairs(subject_means(design, x), subject_means(design, y)).n_edges > 100


def test_features_of_unusual_course_are_damped_and_others_hardly() -> None:
    rng = np.random.default_rng(9)
    slow = _course(rng, 0.95, 30, 5, 300)
    fast = _course(rng, 0.0, 30, 5, 300)
    design = SubjectDesign.of(np.repeat(np.arange(30), 5), np.tile(np.arange(5), 30))
    alike = subject_space((fast, fast), design, None, "visits")
    assert course_damping(alike, design, fast).min() > 0.97
    mixed = np.hstack([slow[:, :40], fast])
    damping = course_damping(subject_space((mixed, mixed), design, None, "visits"), design, mixed)
    assert damping[:40].mean() < 0.95
    assert damping[40:].mean() > 0.97


def test_leaving_a_subject_out_in_closed_form_equals_refitting() -> None:
    design, x, y = _study(10, 0.0, subjects=6, visits=3, p=5, q=4)
    plain = SubjectDesign.of(design.subject)
    space = subject_space((x, y), plain, None, "visits")
    i, j = np.array([0, 4, 2]), np.array([3, 0, 1])
    found = without_subject(space, space.matrix @ x, space.matrix @ y, i, j)
    for value, a, b in zip(found, i, j, strict=True):
        left = []
        for s in range(6):
            keep = design.subject != s
            indicators = np.equal.outer(design.subject[keep], np.unique(design.subject[keep])[1:]).astype(
                float
            )
            removed = Nuisance.of(indicators, keep.sum())
            left.append(stats.pearsonr(removed.residuals(x[keep, a]), removed.residuals(y[keep, b]))[0])
        assert_allclose(value, min(left, key=abs), atol=1e-10)


def test_a_group_by_visit_takes_the_groups_own_course_away() -> None:
    design, x, y = _study(11, 0.3, subjects=20)
    treated = (np.arange(20) % 2)[design.subject][:, None].astype(float)
    response = 6.0 * treated * (design.visit >= 2)[:, None]
    x, y = x + response, y + response
    assert screen_repeated([BlockPair("a", x, y, treated)], [design], "visits").n_edges > 50
    columns = by_visit(design, treated)
    assert screen_repeated([BlockPair("a", x, y, columns)], [design], "visits").n_edges <= 2


def test_nothing_depends_on_the_order_of_samples_or_on_rank_free_units() -> None:
    design, x, y = _study(12, 0.6)
    order = np.random.default_rng(13).permutation(60)
    shuffled = SubjectDesign.of(design.subject[order], design.visit[order])
    for correlation in ("pearson", "spearman"):
        one = screen_repeated([BlockPair("a", x, y)], [design], "visits", correlation=correlation)
        other = screen_repeated(
            [BlockPair("a", 7.0 * x[order] - 3.0, y[order])], [shuffled], "visits", correlation=correlation
        )
        at = (0, np.arange(40), np.arange(40))
        assert_allclose(other.lookup(*at).r, one.lookup(*at).r, atol=1e-9)


def test_gaps_and_constants_are_untestable_and_subjects_with_one_sample_are_left_out() -> None:
    design, x, y = _study(14, 0.3)
    x[:, 0], y[0, 1] = 5.0, np.nan
    x[:, 2] = np.random.default_rng(1).normal(size=15)[design.subject]
    alone = np.append(design.subject, 99)
    bigger = SubjectDesign.of(alone, np.append(design.visit, 0))
    x, y = np.vstack([x, np.ones((1, 60))]), np.vstack([y, np.ones((1, 40))])
    screen = screen_repeated([BlockPair("a", x, y)], [bigger], "visits")
    assert screen.tested == (58 * 39,)
    assert_array_equal(screen.n, 60)


def test_what_cannot_be_screened_is_refused() -> None:
    design, x, y = _study(15, 0.0)
    single = SubjectDesign.of(np.arange(60))
    with pytest.raises(NumericsError, match="changes between visits need subjects with two samples"):
        screen_repeated([BlockPair("a", x, y)], [single], "visits")
    with pytest.raises(NumericsError, match="a block has 60 samples and the design 59"):
        screen_repeated([BlockPair("a", x, y)], [design.take(np.arange(59))], "visits")
    with pytest.raises(NumericsError, match="1 pairs of blocks and 2 designs"):
        screen_repeated([BlockPair("a", x, y)], [design, design], "visits")
    with pytest.raises(NumericsError, match="is a basis; give its columns"):
        screen_repeated([BlockPair("a", x, y, Nuisance.of(None, 60))], [design], "visits")
    with pytest.raises(NumericsError, match="level is 'both'"):
        screen_repeated([BlockPair("a", x, y)], [design], "both")


def test_an_odd_sample_in_both_blocks_makes_no_edges() -> None:
    studies = []
    for seed in range(20):
        design, x, y = _study(200 + seed, 0.5, subjects=20)
        rng = np.random.default_rng(seed)
        x[5] += 6.0 * rng.normal(size=60)
        y[5] += 6.0 * rng.normal(size=40)
        studies.append(screen_repeated([BlockPair("a", x, y)], [design], "visits").n_edges > 0)
    assert sum(studies) <= 4
