"""Features that pull together, against each other or independently, and the guide of the circle."""

from __future__ import annotations

import numpy as np
import pytest

from workbench.engine.look.components import PrincipalComponents
from workbench.look.relations import feature_relations, guide_radius


def two_factor_block(seed: int = 0) -> np.ndarray:
    """Features 0-9 follow one factor, 10-19 its opposite, 20-29 another factor; the rest is noise."""
    rng = np.random.default_rng(seed)
    one, other = 1.3 * rng.normal(size=(2, 40, 1))
    x = rng.normal(size=(40, 60)) * 0.5
    x[:, :10] += one
    x[:, 10:20] -= one
    x[:, 20:30] += other
    return x


def test_ends_hold_the_features_that_were_planted_there() -> None:
    x = two_factor_block()
    z = (x - x.mean(axis=0)) / x.std(axis=0, ddof=1)
    found = feature_relations(z, PrincipalComponents(n_components=2).fit(x).correlations_)
    ends = {(pull.component, pull.end): {j // 10 for j in pull.features} for pull in found.pulls}
    assert {frozenset(ends[1, "+"]), frozenset(ends[1, "-"])} == {frozenset({0}), frozenset({1})}
    assert ends[2, "+"] == {2}
    opposed = next(r for r in found.between if r.one.component == r.other.component == 1)
    assert opposed.high < -0.6
    across = [r.median for r in found.between if r.one.component != r.other.component]
    assert max(map(abs, across)) < 0.4


def test_correlations_told_are_those_of_the_features() -> None:
    x = two_factor_block(1)
    z = (x - x.mean(axis=0)) / x.std(axis=0, ddof=1)
    found = feature_relations(z, PrincipalComponents(n_components=2).fit(x).correlations_)
    pull = found.pulls[0]
    r = np.corrcoef(x[:, pull.features].T)[np.triu_indices(len(pull.features), 1)]
    assert pull.within == pytest.approx((r.min(), np.median(r), r.max()))


@pytest.mark.parametrize("n", [6, 12, 40])
def test_nineteen_of_twenty_random_directions_stay_within_the_guide(n: int) -> None:
    """20,000 random directions against two given components, to 4 standard errors."""
    rng = np.random.default_rng(2)
    scores = rng.normal(size=(n, 2))
    scores = np.linalg.qr(scores - scores.mean(axis=0))[0]
    x = rng.normal(size=(n, 20_000))
    x -= x.mean(axis=0)
    radius = np.linalg.norm(scores.T @ (x / np.linalg.norm(x, axis=0)), axis=0)
    assert np.mean(radius > guide_radius(n)) == pytest.approx(0.05, abs=4.0 * np.sqrt(0.05 * 0.95 / 20_000))


def test_three_samples_have_no_guide() -> None:
    assert np.isnan(guide_radius(3))
