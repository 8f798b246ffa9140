"""Ridge canonical pairs: planted truth, invariants, other routes to the same answer, and what is refused."""

from __future__ import annotations

import re
import tracemalloc

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.linalg import block_diag, eigh, svd
from sklearn.utils.estimator_checks import parametrize_with_checks

from workbench.engine import Nuisance, RegularisedCCA, standardise
from workbench.errors import NumericsError


def draw_sides(
    n: int, p: int, q: int, seed: int = 0, strength: float = 0.0
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Two sides with one shared factor on the first third of their features, and the factor."""
    rng = np.random.default_rng(seed)
    factor = rng.normal(size=n)
    x, y = rng.normal(size=(n, p)), rng.normal(size=(n, q))
    x[:, : p // 3 + 1] += strength * factor[:, None]
    y[:, : q // 3 + 1] -= strength * factor[:, None]
    return x, y, factor


def standardised(x: np.ndarray) -> np.ndarray:
    return (x - x.mean(axis=0)) / x.std(axis=0, ddof=1)


@parametrize_with_checks([RegularisedCCA(n_components=1), RegularisedCCA(n_components=1, ridge=(1.0, 0.1))])
def test_the_contract_of_scikit_learn_holds(estimator: RegularisedCCA, check: object) -> None:
    """Its own checks, which give Y a single column: hence one component."""
    check(estimator)  # type: ignore[operator]


@pytest.mark.parametrize(("n", "p", "q"), [(60, 2000, 200), (60, 40, 12)])
def test_a_planted_factor_is_recovered(n: int, p: int, q: int) -> None:
    """The first pair is the factor on both sides, in new samples too; its features stand out."""
    x, y, factor = draw_sides(2 * n, p, q, strength=1.0)
    cca = RegularisedCCA(1, random_state=0).fit(x[:n], y[:n])
    u, v = cca.transform(x[n:], y[n:])
    assert abs(np.corrcoef(u[:, 0], factor[n:])[0, 1]) > 0.9
    assert np.corrcoef(u[:, 0], v[:, 0])[0, 1] > 0.85
    own = np.abs(cca.x_correlations_[:, 0])
    assert own[: p // 3 + 1].mean() > 3 * own[p // 3 + 1 :].mean()


@pytest.mark.parametrize(("p", "q"), [(6, 4), (60, 45), (70, 3)])
@pytest.mark.parametrize("ridge", [0.3, (2.0, 0.05)])
def test_the_primal_problem_has_the_same_solution(p: int, q: int, ridge: float | tuple[float, float]) -> None:
    """Against scipy's generalised eigenproblem over the features, p < n and p > n: weights and roots."""
    x, y, _ = draw_sides(20, p, q, strength=0.5)
    cca = RegularisedCCA(2, ridge=ridge).fit(x, y)
    a, b = standardised(x), standardised(y)
    cross = np.block([[np.zeros((p, p)), a.T @ b], [b.T @ a, np.zeros((q, q))]])
    within = block_diag(a.T @ a + cca.ridge_[0] * np.eye(p), b.T @ b + cca.ridge_[1] * np.eye(q))
    roots, vectors = eigh(cross, within, subset_by_index=[p + q - 2, p + q - 1])
    for k in range(2):
        weights = np.sqrt(2.0) * vectors[:, 1 - k]
        got = np.concatenate([cca.x_weights_[:, k], cca.y_weights_[:, k]])
        assert_allclose(got * np.sign(got @ weights), weights, atol=1e-8)
        assert_allclose(cca.x_scores_[:, k] @ cca.y_scores_[:, k], roots[1 - k], rtol=1e-9)


def test_without_ridge_projections_give_the_same() -> None:
    """Correlations are the singular values of the product of two orthonormal bases (Bjorck & Golub 1973)."""
    x, y, _ = draw_sides(40, 7, 5)
    bases = [np.linalg.qr(side - side.mean(axis=0))[0] for side in (x, y)]
    want = svd(bases[0].T @ bases[1], compute_uv=False)
    assert_allclose(RegularisedCCA(5, ridge=0).fit(x, y).correlations_, want, rtol=1e-10)


def test_endless_ridge_gives_partial_least_squares() -> None:
    """The first weights tend to the first singular vectors of X'Y."""
    x, y, _ = draw_sides(20, 50, 8)
    cca = RegularisedCCA(1, ridge=1e9).fit(x, y)
    left, _, right = svd(standardised(x).T @ standardised(y))
    for weights, vector in ((cca.x_weights_[:, 0], left[:, 0]), (cca.y_weights_[:, 0], right[0])):
        assert abs(weights @ vector) / np.linalg.norm(weights) == pytest.approx(1.0, abs=1e-8)


@pytest.mark.parametrize(("p", "q"), [(6, 4), (60, 45)])
def test_weights_keep_their_constraint(p: int, q: int) -> None:
    """``A'(X'X + l I)A`` is the identity, so that scores are no longer than 1, and scores are ``X A``."""
    x, y, _ = draw_sides(20, p, q)
    cca = RegularisedCCA(3, ridge=0.7).fit(x, y)
    a = standardised(x)
    within = a.T @ a + cca.ridge_[0] * np.eye(p)
    assert_allclose(cca.x_weights_.T @ within @ cca.x_weights_, np.eye(3), atol=1e-9)
    assert_allclose(a @ cca.x_weights_, cca.x_scores_, atol=1e-10)
    assert np.linalg.norm(cca.x_scores_, axis=0).max() <= 1.0


def test_without_ridge_pairs_are_uncorrelated() -> None:
    """Variates of different pairs have no correlation, within a side or across, and redundancy is rho^2."""
    x, y, _ = draw_sides(50, 6, 4)
    cca = RegularisedCCA(4, ridge=0.0).fit(x, y)
    together = np.hstack([cca.x_scores_, cca.y_scores_])
    rho = np.diag(cca.correlations_)
    assert_allclose(np.corrcoef(together.T), np.block([[np.eye(4), rho], [rho, np.eye(4)]]), atol=1e-10)
    # Stewart & Love 1968: redundancy is the variance extracted times the squared canonical correlation.
    share = cca.x_explained_[:, 0] * cca.correlations_**2
    assert_allclose(cca.x_redundancy_[:, 0], share, rtol=1e-9)
    assert_allclose(cca.y_explained_.sum(), 1.0, rtol=1e-10)


@pytest.mark.parametrize(("p", "q"), [(6, 4), (60, 45)])
def test_scale_and_origin_of_features_do_not_matter(p: int, q: int) -> None:
    """Units of measurement change nothing but what standardising learnt."""
    x, y, _ = draw_sides(20, p, q)
    first = RegularisedCCA(2, ridge=0.5).fit(x, y)
    units = 10.0 ** np.random.default_rng(1).uniform(-4, 4, size=p)
    other = RegularisedCCA(2, ridge=0.5).fit(x * units + 30.0 * units, y)
    assert_allclose(other.x_scores_, first.x_scores_, atol=1e-8)
    assert_allclose(other.x_correlations_, first.x_correlations_, atol=1e-8)


def test_order_of_samples_and_features_does_not_matter() -> None:
    """Shuffled samples and features give the same numbers, shuffled; nor do the signs depend on it."""
    x, y, _ = draw_sides(20, 30, 9)
    rng = np.random.default_rng(2)
    rows, columns = rng.permutation(20), rng.permutation(30)
    first = RegularisedCCA(3, ridge=1.0).fit(x, y)
    other = RegularisedCCA(3, ridge=1.0).fit(x[np.ix_(rows, columns)], y[rows])
    assert_allclose(other.x_scores_, first.x_scores_[rows], atol=1e-9)
    assert_allclose(other.x_weights_, first.x_weights_[columns], atol=1e-9)


def test_the_sides_can_be_exchanged() -> None:
    """X and Y in each other's place give each other's results, with the ridges exchanged."""
    x, y, _ = draw_sides(20, 30, 9)
    first, other = (
        RegularisedCCA(2, ridge=(1.0, 0.2)).fit(x, y),
        RegularisedCCA(2, ridge=(0.2, 1.0)).fit(y, x),
    )
    assert_allclose(other.correlations_, first.correlations_, rtol=1e-10)
    assert_allclose(other.y_cross_correlations_, first.x_cross_correlations_, atol=1e-9)
    assert_allclose(other.y_redundancy_, first.x_redundancy_, atol=1e-9)


def test_the_strongest_feature_of_both_sides_is_positive() -> None:
    """One sign rule over both sides, whatever the sign of the data."""
    x, y, _ = draw_sides(20, 30, 9, strength=1.0)
    for flip in (1.0, -1.0):
        cca = RegularisedCCA(2, ridge=1.0).fit(flip * x, y)
        every = np.vstack([cca.x_correlations_, cca.y_correlations_])
        assert np.all(every.max(axis=0) > -every.min(axis=0))
        assert np.all(cca.correlations_ > 0)


def test_correlations_are_those_of_numpy() -> None:
    """Own and cross correlations of every feature with the variates."""
    x, y, _ = draw_sides(20, 30, 9)
    cca = RegularisedCCA(2, ridge=1.0).fit(x, y)
    full = np.corrcoef(np.hstack([x, y, cca.x_scores_, cca.y_scores_]).T)
    assert_allclose(cca.x_correlations_, full[:30, 39:41], atol=1e-10)
    assert_allclose(cca.x_cross_correlations_, full[:30, 41:], atol=1e-10)
    assert_allclose(cca.y_correlations_, full[30:39, 41:], atol=1e-10)
    assert_allclose(cca.y_cross_correlations_, full[30:39, 39:41], atol=1e-10)
    assert_allclose(cca.correlations_, [full[39, 41], full[40, 42]], atol=1e-10)


def test_constant_features_are_left_out_and_told() -> None:
    """The rest is as without them; their weight is 0, their correlation missing; new values there are ignored."""
    x, y, _ = draw_sides(20, 30, 9)
    wider = np.insert(x, 4, 3.7, axis=1)
    first, cca = RegularisedCCA(2, ridge=1.0).fit(x, y), RegularisedCCA(2, ridge=1.0).fit(wider, y)
    assert_array_equal(np.flatnonzero(~cca.x_kept_), [4])
    assert_allclose(np.delete(cca.x_weights_, 4, axis=0), first.x_weights_, atol=1e-10)
    assert_array_equal(cca.x_weights_[4], 0.0)
    assert np.isnan(cca.x_correlations_[4]).all()
    assert_allclose(cca.x_explained_, first.x_explained_, rtol=1e-10)
    wider[:, 4] = 99.0
    assert_allclose(cca.transform(wider), cca.x_scores_, atol=1e-9)


def test_transform_gives_the_scores_of_the_fit() -> None:
    """For the samples that were fitted, with and without Y; one row at a time too."""
    x, y, _ = draw_sides(20, 30, 9)
    cca = RegularisedCCA(2, ridge=1.0, x_block_sizes=[10, 20]).fit(x, y)
    u, v = cca.transform(x, y)
    assert_allclose(u, cca.x_scores_, atol=1e-10)
    assert_allclose(v, cca.y_scores_, atol=1e-10)
    assert_allclose(cca.transform(x[3:4]), u[3:4], atol=1e-12)
    with pytest.raises(NumericsError, match="Y has 8 features and the fit had 9"):
        cca.transform(x, y[:, 1:])


def test_blocks_of_one_side_weigh_the_same() -> None:
    """Repeating a block's features changes nothing: the block's weight is its own, not its width's."""
    x, y, _ = draw_sides(20, 12, 9)
    first = RegularisedCCA(2, ridge=1.0, x_block_sizes=[4, 8]).fit(x, y)
    wider = np.hstack([x[:, :4], np.tile(x[:, 4:], 5)])
    other = RegularisedCCA(2, ridge=1.0, x_block_sizes=[4, 40]).fit(wider, y)
    assert_allclose(other.correlations_, first.correlations_, rtol=1e-9)
    assert_allclose(other.x_correlations_[:12], first.x_correlations_, atol=1e-8)
    assert first.x_explained_.shape == (2, 2)
    assert_allclose(other.x_explained_, first.x_explained_, rtol=1e-8)


def test_duplicated_features_change_no_correlation_without_ridge() -> None:
    """Exact copies add no direction, and no failure."""
    x, y, _ = draw_sides(40, 5, 4)
    first = RegularisedCCA(4, ridge=0.0).fit(x, y)
    other = RegularisedCCA(4, ridge=0.0).fit(np.hstack([x, x[:, :2]]), y)
    assert_allclose(other.correlations_, first.correlations_, rtol=1e-10)


def test_auto_takes_the_choice_of_cross_validation() -> None:
    """The fit is the one with the chosen ridge given; the random state decides the folds."""
    x, y, _ = draw_sides(30, 60, 12, strength=0.8)
    auto = RegularisedCCA(2, random_state=3).fit(x, y)
    given = RegularisedCCA(2, ridge=auto.ridge_multiples_).fit(x, y)
    assert auto.ridge_choice_.multiples == auto.ridge_multiples_
    assert given.ridge_choice_ is None
    assert_array_equal(given.x_weights_, auto.x_weights_)
    assert_allclose(auto.ridge_, np.multiply(auto.ridge_multiples_, auto.noise_level_), rtol=1e-12)
    again, other = (RegularisedCCA(2, random_state=seed).fit(x, y).ridge_choice_ for seed in (3, 4))
    assert_array_equal(again.scores, auto.ridge_choice_.scores)
    assert not np.array_equal(other.scores, auto.ridge_choice_.scores)


def test_frames_and_float32_are_welcome_and_left_alone() -> None:
    """Feature names are kept, results are float64, and the caller's arrays are as before."""
    x, y, _ = draw_sides(20, 8, 5)
    frame = pd.DataFrame(x, columns=[f"g{j}" for j in range(8)])
    before = frame.copy()
    cca = RegularisedCCA(2, ridge=1.0).fit(frame, y.astype(np.float32))
    pd.testing.assert_frame_equal(frame, before)
    assert list(cca.feature_names_in_) == list(frame.columns)
    assert cca.y_weights_.dtype == np.float64
    assert list(cca.get_feature_names_out()) == ["regularisedcca0", "regularisedcca1"]
    assert_allclose(cca.correlations_, RegularisedCCA(2, ridge=1.0).fit(x, y).correlations_, rtol=1e-5)


def test_nothing_of_features_by_features_is_made() -> None:
    """10 samples of 6,000 and 5,000 features take less than 30 MB; one such matrix would be 200 MB."""
    x, y, _ = draw_sides(10, 6000, 5000)
    tracemalloc.start()
    RegularisedCCA(2, ridge=1.0).fit(x, y)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 30e6


@pytest.mark.parametrize(
    ("shape", "asked", "why"),
    [
        (
            (30, 3, 8),
            5,
            "asked for 5 canonical pairs, the data support 3, because side X has rank 3 (3 features)",
        ),
        ((6, 40, 50), 6, "the data support 5, because side X has rank 5 (40 features)"),
        ((30, 8, 1), 2, "side Y has rank 1 (1 features); ask for at most 1"),
    ],
)
def test_more_pairs_than_the_data_support_are_refused(
    shape: tuple[int, int, int], asked: int, why: str
) -> None:
    x, y, _ = draw_sides(*shape)
    with pytest.raises(NumericsError, match=re.escape(why)):
        RegularisedCCA(asked, ridge=1.0).fit(x, y)


def test_sides_that_share_no_direction_are_refused() -> None:
    """Two sides that are exactly orthogonal have no pair at all."""
    q = np.linalg.qr(np.column_stack([np.ones(8), np.random.default_rng(0).normal(size=(8, 4))]))[0][:, 1:]
    with pytest.raises(NumericsError, match=r"the data support 0, because .* only 0 of their directions"):
        RegularisedCCA(1, ridge=1.0).fit(q[:, :2], q[:, 2:])


@pytest.mark.parametrize(
    ("n", "p", "q", "ridge", "why"),
    [
        (20, 19, 5, 0, r"ridge 0 \(none\) for side X with 19 features and 19 degrees of freedom"),
        (20, 5, 200, (0.5, 0.0), r"ridge 0 \(none\) for side Y with 200 features and 19 degrees"),
        (20, 12, 9, 0, r"both sides with ranks 12 and 9 and 19 degrees of freedom"),
    ],
)
def test_no_ridge_is_refused_where_perfection_is_certain(
    n: int, p: int, q: int, ridge: float | tuple[float, float], why: str
) -> None:
    x, y, _ = draw_sides(n, p, q)
    with pytest.raises(NumericsError, match=why):
        RegularisedCCA(1, ridge=ridge).fit(x, y)


def test_the_edge_of_what_goes_without_ridge() -> None:
    """One feature fewer than refused is fitted, and is short of perfect; a ridge on one side may be enough."""
    x, y, _ = draw_sides(20, 12, 7)
    assert RegularisedCCA(1, ridge=0).fit(x, y).correlations_[0] < 1.0 - 1e-6
    x, y, _ = draw_sides(20, 18, 40)
    assert RegularisedCCA(1, ridge=(0.0, 1.0)).fit(x, y).x_scores_.shape == (20, 1)


def test_removed_nuisance_counts() -> None:
    """Its rank is taken from the degrees of freedom, and 'auto' is refused since samples are not held out."""
    x, y, _ = draw_sides(20, 17, 2)
    removed = Nuisance.of(np.random.default_rng(5).normal(size=(20, 2)), 20)
    a, b = standardise(x, removed).values, standardise(y, removed).values
    with pytest.raises(NumericsError, match="17 features and 17 degrees of freedom"):
        RegularisedCCA(1, ridge=0, nuisance_rank=3).fit(a, b)
    with pytest.raises(NumericsError, match="ridge 'auto' with nuisance_rank 3"):
        RegularisedCCA(1, nuisance_rank=3).fit(a, b)
    cca = RegularisedCCA(1, ridge=1.0, nuisance_rank=3).fit(a, b)
    assert_allclose(cca.x_scale_, 1.0, rtol=1e-9)
    assert_allclose(removed.basis.T @ cca.x_scores_, 0.0, atol=1e-10)


@pytest.mark.parametrize(
    "ridge", ["automatic", -1.0, np.nan, np.inf, True, (1.0,), (1.0, -2.0), None, (1, 2, 3)]
)
def test_ridges_that_mean_nothing_are_refused(ridge: object) -> None:
    x, y, _ = draw_sides(20, 5, 4)
    with pytest.raises(NumericsError, match="allowed: 'auto', one number of at least 0, or two of them"):
        RegularisedCCA(1, ridge=ridge).fit(x, y)  # type: ignore[arg-type]


@pytest.mark.parametrize("asked", [0, -1, 1.5, True])
def test_component_numbers_that_mean_nothing_are_refused(asked: object) -> None:
    x, y, _ = draw_sides(20, 5, 4)
    with pytest.raises(NumericsError, match=r"n_components is .*; allowed: a whole number of at least 1"):
        RegularisedCCA(asked, ridge=1.0).fit(x, y)  # type: ignore[arg-type]


def test_unusable_sides_are_refused() -> None:
    """A constant side, missing values on either side, one sample, rows that differ in number."""
    x, y, _ = draw_sides(20, 5, 4)
    gap = y.copy()
    gap[3, 1] = np.nan
    with pytest.raises(NumericsError, match="none of the 5 features of side X varies over the 20 samples"):
        RegularisedCCA(1, ridge=1.0).fit(np.ones((20, 5)), y)
    with pytest.raises(ValueError, match="Input Y contains NaN"):
        RegularisedCCA(1, ridge=1.0).fit(x, gap)
    with pytest.raises(ValueError, match="1 sample"):
        RegularisedCCA(1, ridge=1.0).fit(x[:1], y[:1])
    with pytest.raises(ValueError, match="inconsistent numbers of samples"):
        RegularisedCCA(1, ridge=1.0).fit(x, y[1:])


def test_without_ridge_all_pairs_predict_as_least_squares_does() -> None:
    """Y of three features from X of six: the regression of numpy, in new samples too."""
    x, y, _ = draw_sides(60, 6, 3, strength=1.0)
    new = np.random.default_rng(5).normal(size=(10, 6))
    design, fresh = (np.column_stack([np.ones(len(side)), side]) for side in (x, new))
    want = fresh @ np.linalg.lstsq(design, y, rcond=None)[0]
    assert_allclose(RegularisedCCA(3, ridge=0).fit(x, y).predict(new), want, atol=1e-10)


def test_predictions_with_honest_correlations_beat_the_mean_in_new_samples() -> None:
    """A factor on a third of the features: their error falls; a correlation of 0 gives the mean."""
    x, y, _ = draw_sides(120, 200, 80, strength=1.0)
    cca = RegularisedCCA(1, ridge=10.0).fit(x[:60], y[:60])
    error = np.mean((cca.predict(x[60:], [0.9])[:, :27] - y[60:, :27]) ** 2)
    assert error < 0.8 * np.mean((y[60:, :27] - y[:60, :27].mean(axis=0)) ** 2)
    assert_allclose(cca.predict(x[60:], [0.0]), np.tile(y[:60].mean(axis=0), (60, 1)), atol=1e-12)
    with pytest.raises(NumericsError, match="give one between -1 and 1 for each of the 1 pairs"):
        cca.predict(x, [0.5, 0.5])


def test_implied_correlations_are_the_sum_over_pairs() -> None:
    """Features of the factor are implied to go together with the sign that they have, others hardly."""
    x, y, _ = draw_sides(80, 60, 30, strength=1.5)
    cca = RegularisedCCA(2, ridge=1.0).fit(x, y)
    inside = cca.implied_correlations(np.arange(10), np.arange(10), [0.9, -0.2])
    want = 0.9 * cca.x_correlations_[:10, 0] * cca.y_correlations_[:10, 0]
    assert_allclose(inside, want, rtol=1e-12)
    assert (inside < -0.3).all()
    assert np.abs(cca.implied_correlations(np.arange(30, 40), np.arange(15, 25), [0.9, 0.0])).max() < 0.3
