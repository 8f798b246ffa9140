"""Principal components: identities, both routes, invariances, and what is refused with which reason."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sklearn.utils.estimator_checks import parametrize_with_checks

from workbench.engine.look.components import PrincipalComponents
from workbench.errors import NumericsError

SHAPES = [(12, 5), (12, 11), (12, 12), (12, 300)]


def block(n: int, p: int, seed: int = 0) -> np.ndarray:
    """Two strong factors, unequal noise, means far from 0."""
    rng = np.random.default_rng(seed)
    factors = rng.normal(size=(n, 2)) @ rng.normal(size=(2, p))
    return 50.0 + 3.0 * factors + rng.normal(size=(n, p)) * rng.uniform(0.5, 2.0, p)


@parametrize_with_checks([PrincipalComponents(), PrincipalComponents(n_components=1, scale=False)])
def test_scikit_learn_accepts_the_estimator(estimator, check) -> None:
    check(estimator)


@pytest.mark.parametrize(("n", "p"), SHAPES)
@pytest.mark.parametrize("scale", [True, False])
def test_variances_of_components_add_up_to_those_of_the_features(n: int, p: int, scale: bool) -> None:
    x = block(n, p)
    pca = PrincipalComponents(scale=scale).fit(x)
    total = float(p) if scale else x.var(axis=0, ddof=1).sum()
    assert_allclose(pca.eigenvalues_.sum(), total, rtol=1e-10)
    assert_allclose(pca.total_variance_, total, rtol=1e-12)
    assert_allclose(pca.cumulative_ratio_[-1], 1.0, rtol=1e-10)


@pytest.mark.parametrize(("n", "p"), SHAPES)
def test_covariances_between_components_vanish(n: int, p: int) -> None:
    pca = PrincipalComponents().fit(block(n, p))
    covariance = np.cov(pca.scores_.T)
    assert_allclose(covariance, np.diag(pca.explained_variance_), atol=1e-10 * pca.eigenvalues_[0])
    assert_allclose(pca.components_ @ pca.components_.T, np.eye(pca.n_components_), atol=1e-10)


@pytest.mark.parametrize(("n", "p"), SHAPES)
@pytest.mark.parametrize("scale", [True, False])
def test_the_place_in_the_circle_is_the_correlation(n: int, p: int, scale: bool) -> None:
    x = block(n, p)
    pca = PrincipalComponents(n_components=3, scale=scale).fit(x)
    expected = np.corrcoef(x.T, pca.scores_.T)[:p, p:]
    assert_allclose(pca.correlations_, expected, atol=1e-10)


def test_the_cosine_of_two_features_is_their_correlation_when_two_components_tell_all() -> None:
    rng = np.random.default_rng(3)
    x = rng.normal(size=(15, 2)) @ rng.normal(size=(2, 40))
    pca = PrincipalComponents().fit(x)
    assert pca.rank_ == 2
    assert_allclose(np.linalg.norm(pca.correlations_, axis=1), 1.0, atol=1e-10)
    assert_allclose(pca.correlations_ @ pca.correlations_.T, np.corrcoef(x.T), atol=1e-10)


@pytest.mark.parametrize(("n", "p"), SHAPES)
def test_all_components_rebuild_the_block(n: int, p: int) -> None:
    x = block(n, p)
    pca = PrincipalComponents().fit(x)
    assert_allclose(pca.inverse_transform(pca.scores_), x, rtol=1e-10)
    assert_allclose(pca.transform(x), pca.scores_, atol=1e-9)


def test_few_and_many_features_are_one_answer() -> None:
    """The decomposition of ``X`` itself (p <= n) and that of ``XX'`` (p > n): columns of zeros change the route."""
    x = block(20, 8)
    narrow = PrincipalComponents(n_components=4).fit(x)
    wide = PrincipalComponents(n_components=4).fit(np.hstack([x, np.zeros((20, 30))]))
    assert_allclose(wide.eigenvalues_, narrow.eigenvalues_, rtol=1e-10)
    assert_allclose(wide.scores_, narrow.scores_, atol=1e-9)
    assert_allclose(wide.components_[:, :8], narrow.components_, atol=1e-10)
    assert np.isnan(wide.correlations_[8:]).all()


def test_units_of_features_and_order_of_samples_do_not_matter() -> None:
    rng = np.random.default_rng(1)
    x = block(14, 60)
    order = rng.permutation(14)
    one = PrincipalComponents(n_components=3).fit(x)
    other = PrincipalComponents(n_components=3).fit((x * rng.uniform(0.01, 100.0, 60) + 7.0)[order])
    assert_allclose(other.scores_, one.scores_[order], atol=1e-8)
    assert_allclose(other.components_, one.components_, atol=1e-9)


def test_the_largest_loading_is_positive_whatever_the_sign_of_the_data() -> None:
    x = block(14, 60)
    for values in (x, -x):
        components = PrincipalComponents(n_components=5).fit(values).components_
        largest = components[np.arange(5), np.abs(components).argmax(axis=1)]
        assert (largest > 0.0).all()


def test_planted_directions_come_back() -> None:
    rng = np.random.default_rng(5)
    score = rng.normal(size=(60, 1))
    loading = rng.choice([-1.0, 1.0], size=(1, 400))
    pca = PrincipalComponents(n_components=1).fit(score @ loading + rng.normal(size=(60, 400)))
    assert abs(np.corrcoef(pca.scores_[:, 0], score[:, 0])[0, 1]) > 0.99
    assert abs(np.sign(pca.components_[0]) @ loading[0]) > 390


def test_far_means_cost_no_digits() -> None:
    x = block(10, 100)
    near, far = PrincipalComponents(n_components=3).fit(x), PrincipalComponents(n_components=3).fit(x + 1e7)
    assert_allclose(far.scores_, near.scores_, atol=1e-5)


def test_a_constant_feature_takes_no_part_and_the_input_stays() -> None:
    x = block(10, 6)
    x[:, 2] = 4.0
    before = x.copy()
    pca = PrincipalComponents().fit(x)
    assert pca.varies_.tolist() == [True, True, False, True, True, True]
    assert_allclose(pca.components_[:, 2], 0.0)
    assert np.isnan(pca.correlations_[2]).all()
    assert pca.total_variance_ == pytest.approx(5.0, rel=1e-12)
    assert np.array_equal(x, before)


def test_one_sample_is_refused() -> None:
    with pytest.raises(NumericsError, match=r"1 sample .* need at least 2"):
        PrincipalComponents().fit(np.ones((1, 5)))


def test_two_samples_have_one_component() -> None:
    x = np.array([[1.0, 2.0, 5.0], [3.0, 2.0, 1.0]])
    pca = PrincipalComponents().fit(x)
    assert (pca.rank_, pca.n_components_) == (1, 1)
    assert_allclose(np.abs(pca.correlations_[[0, 2], 0]), 1.0)
    with pytest.raises(
        NumericsError, match="2 components were asked for and the block supports 1: 2 samples"
    ):
        PrincipalComponents(n_components=2).fit(x)


def test_a_constant_block_is_refused() -> None:
    with pytest.raises(NumericsError, match="none of the 4 features varies over the 6 samples"):
        PrincipalComponents().fit(np.ones((6, 4)))


@pytest.mark.parametrize(
    ("n", "p", "asked", "reason"),
    [
        (
            5,
            50,
            5,
            "5 components were asked for and the block supports 4: 5 samples give at most 4 directions",
        ),
        (
            30,
            3,
            9,
            "supports 3: 30 samples give at most 29 directions once centred, and 3 features vary; ask",
        ),
    ],
)
def test_more_components_than_the_data_support_are_refused(n: int, p: int, asked: int, reason: str) -> None:
    with pytest.raises(NumericsError, match=reason):
        PrincipalComponents(n_components=asked).fit(block(n, p))


def test_copies_of_one_feature_are_named_as_the_reason() -> None:
    x = np.repeat(block(8, 1), 20, axis=1)
    with pytest.raises(NumericsError, match=r"supports 1: .* the others repeat these 1"):
        PrincipalComponents(n_components=2).fit(x)


@pytest.mark.parametrize("asked", [0, -1, 2.5, True, "all"])
def test_a_number_of_components_must_be_a_whole_one(asked: object) -> None:
    with pytest.raises(
        NumericsError, match=r"n_components is .* allowed: a whole number of at least 1, or None"
    ):
        PrincipalComponents(n_components=asked).fit(block(8, 8))


def test_scores_of_another_width_are_refused() -> None:
    pca = PrincipalComponents(n_components=2).fit(block(8, 8))
    with pytest.raises(NumericsError, match="the scores have 3 columns and the fit kept 2"):
        pca.inverse_transform(np.zeros((4, 3)))
