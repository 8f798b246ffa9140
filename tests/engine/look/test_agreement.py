"""Agreement of two blocks: identities, exact means, calibrated p, restricted permutations, small studies."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.spatial import procrustes
from scipy.stats import kstest

from workbench.engine.look.agreement import _pair, block_agreement
from workbench.engine.nuisance import Nuisance
from workbench.errors import NumericsError


def blocks(n: int, seed: int, shared: float = 0.0, p: int = 60, q: int = 15) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    common = rng.normal(size=(n, 2))
    x = shared * common @ rng.normal(size=(2, p)) + rng.normal(size=(n, p))
    return x, shared * common @ rng.normal(size=(2, q)) + rng.normal(size=(n, q))


def test_a_block_agrees_with_itself_turned_and_stretched() -> None:
    x, _ = blocks(20, 0)
    turn = np.linalg.qr(np.random.default_rng(1).normal(size=(60, 60)))[0]
    found = block_agreement(x, 5.0 * x @ turn + 3.0, random_state=1)
    assert (found.rv, found.rv_adjusted, found.procrustes) == pytest.approx((1.0, 1.0, 1.0), abs=1e-9)
    assert found.rv_p == found.procrustes_p == found.smallest_p == 1.0 / 1000


def test_both_sides_may_be_exchanged() -> None:
    x, y = blocks(20, 2, shared=1.0)
    one, other = block_agreement(x, y, random_state=1), block_agreement(y, x, random_state=1)
    assert_allclose(
        [one.rv, one.rv_adjusted, one.procrustes], [other.rv, other.rv_adjusted, other.procrustes], rtol=1e-9
    )


def test_rv_of_single_features_is_their_squared_correlation() -> None:
    x, y = (side[:, :1] for side in blocks(20, 3))
    r = np.corrcoef(x[:, 0], y[:, 0])[0, 1]
    assert block_agreement(x, y, dimensions=(1, 1), random_state=1).rv == pytest.approx(r**2, rel=1e-9)


def test_procrustes_is_that_of_scipy() -> None:
    """scipy.spatial.procrustes gives the disparity, 1 - correlation^2, of two configurations of one width."""
    x, y = blocks(15, 4, shared=1.0, p=3, q=3)
    found = block_agreement(x, y, dimensions=(3, 3), random_state=1)
    assert found.procrustes == pytest.approx(np.sqrt(1.0 - procrustes(x, y)[2]), rel=1e-9)


@pytest.mark.parametrize("strata", [None, [0, 0, 0, 1, 1, 1], [0, 0, 0, 0, 1, 2]])
def test_the_expected_rv_is_its_mean_over_every_allowed_order(strata: list[int] | None) -> None:
    x, y = blocks(6, 5)
    codes = None if strata is None else np.array(strata)
    pairing = _pair(x, y, (2, 2), None, codes)
    same = np.zeros(6, dtype=int) if codes is None else codes
    allowed = [np.array(order) for order in permutations(range(6)) if (same[list(order)] == same).all()]
    mean = np.mean([pairing.statistics(order)[0] for order in allowed])
    assert pairing.expected_rv() == pytest.approx(mean, rel=1e-10)


def test_noise_of_many_features_has_an_rv_near_one_and_an_adjusted_one_near_zero() -> None:
    found = [
        block_agreement(*blocks(12, seed, p=1000, q=1000), permutations=1, random_state=1)
        for seed in range(60)
    ]
    assert min(one.rv for one in found) > 0.9
    assert abs(np.mean([one.rv_adjusted for one in found])) < 0.05


def test_shared_factors_are_found() -> None:
    found = block_agreement(*blocks(24, 7, shared=1.0), random_state=1)
    assert found.rv_p <= 0.01
    assert found.procrustes_p <= 0.01
    assert found.rv_adjusted > 0.3


@pytest.mark.parametrize("kind", ["plain", "nuisance", "strata"])
def test_p_is_uniform_without_agreement(kind: str) -> None:
    """200 pairs of blocks; with a nuisance or strata a batch shifts both, and is taken care of."""
    batch = np.repeat([0, 1], 12)
    nuisance = Nuisance.of(batch[:, None].astype(float), 24) if kind == "nuisance" else None
    p = []
    for seed in range(200):
        x, y = blocks(24, 1000 + seed, p=30, q=10)
        if kind != "plain":
            x, y = x + 2.0 * batch[:, None], y + 2.0 * batch[:, None]
        found = block_agreement(
            x,
            y,
            nuisance=nuisance,
            strata=batch if kind == "strata" else None,
            permutations=99,
            random_state=seed,
        )
        p.append([found.rv_p, found.procrustes_p])
    for column in np.array(p).T:
        assert kstest(column - np.random.default_rng(0).uniform(0.0, 0.01, 200), "uniform").pvalue > 0.01


def test_a_shared_batch_passes_for_agreement_when_nothing_is_done() -> None:
    x, y = blocks(24, 9)
    batch = np.repeat([0.0, 1.0], 12)[:, None]
    assert block_agreement(x + 2.0 * batch, y + 2.0 * batch, random_state=1).rv_p <= 0.01
    removed = block_agreement(
        x + 2.0 * batch, y + 2.0 * batch, nuisance=Nuisance.of(batch, 24), random_state=1
    )
    assert removed.rv_p > 0.05


def test_few_arrangements_are_all_taken() -> None:
    x, y = blocks(5, 10)
    found = block_agreement(x, y, permutations=999, random_state=1)
    assert found.permutations == 119
    assert found.smallest_p == pytest.approx(1.0 / 120)
    assert found.rv_p == block_agreement(x, y, permutations=999, random_state=2).rv_p


def test_too_few_arrangements_have_no_p() -> None:
    x, y = blocks(8, 11)
    found = block_agreement(x, y, strata=np.repeat([0, 1, 2, 3], 2), random_state=1)
    assert "only 16 arrangements of the samples are allowed" in found.withheld
    assert np.isnan([found.rv_p, found.procrustes_p, found.smallest_p]).all()
    assert np.isfinite(found.rv_adjusted)


def test_progress_is_told() -> None:
    told: list[tuple[int, int]] = []
    block_agreement(*blocks(8, 12), permutations=9, random_state=1, progress=lambda *at: told.append(at))
    assert told == [(i, 9) for i in range(1, 10)]


def test_what_cannot_be_compared_is_refused() -> None:
    x, y = blocks(8, 13)
    with pytest.raises(NumericsError, match="8 and 7 samples; agreement needs the same ones in both"):
        block_agreement(x, y[:7], random_state=1)
    with pytest.raises(NumericsError, match="at least 4"):
        block_agreement(x[:3], y[:3], random_state=1)
    with pytest.raises(NumericsError, match="the second block does not vary over the 8 samples"):
        block_agreement(x, np.ones((8, 4)), random_state=1)
    nuisance = Nuisance.of(np.arange(8.0)[:, None], 8)
    with pytest.raises(NumericsError, match="both strata and a nuisance were given"):
        block_agreement(x, y, nuisance=nuisance, strata=np.arange(8) % 2, random_state=1)
