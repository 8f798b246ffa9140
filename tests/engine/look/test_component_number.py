"""The number of components: a planted number is found, noise is not, and nobody is told all."""

from __future__ import annotations

import numpy as np
import pytest
from factor_blocks import NOISES, factor_block, oracle_sees, scaled

from workbench.engine.linear import thin_basis
from workbench.engine.look.component_number import NARROW_RULE, RULE, choose_number
from workbench.engine.signal_components import SignalComponents, signal_components


def signal_of(x: np.ndarray) -> SignalComponents:
    return signal_components(thin_basis(scaled(x)))


def test_the_number_is_hardly_ever_two_too_large_and_seldom_two_too_small() -> None:
    """At most truth + 2 in 95 %, at least truth - 1 in 80 % of the blocks whose factors an oracle sees; never all.

    120 blocks of 24 to 96 samples and 0 to 8 factors; tests/benchmarks/components_number.py prints 200, with
    other rules beside this one.
    """
    blocks = [factor_block(seed) for seed in range(120)]
    found = np.array([signal_of(block.x).number for block in blocks])
    truth = np.array([block.truth for block in blocks])
    seen = np.array([oracle_sees(block, seed, draws=12) for seed, block in enumerate(blocks)])
    assert seen.sum() > 40
    assert np.mean(found <= truth + 2) >= 0.95
    assert np.mean(found[seen] >= truth[seen] - 1) >= 0.80
    assert all(n <= (block.x.shape[0] - 1) // 2 for n, block in zip(found, blocks, strict=True))


@pytest.mark.parametrize("noise", NOISES)
@pytest.mark.parametrize("n", [8, 12, 24, 60])
def test_noise_alone_has_no_component_in_nine_of_ten_blocks(noise: str, n: int) -> None:
    """Stated level 1 %; small studies of unequal samples reach some 6 % at 8 samples, 4 % at 12."""
    found = [signal_of(factor_block(seed, n=n, p=600, factors=0, noise=noise).x).number for seed in range(40)]
    assert np.count_nonzero(found) <= 4


def test_a_sample_of_more_noise_is_no_component_and_is_told() -> None:
    block = factor_block(5, n=30, p=1500, factors=0, noise="normal")
    x = block.x.copy()
    x[7] *= 2.5
    found = signal_of(x)
    assert found.number == 0
    assert int(found.sample_noise.argmax()) == 7


def test_small_clusters_of_near_copies_are_no_components() -> None:
    rng = np.random.default_rng(6)
    base = rng.normal(size=(40, 500))
    x = np.hstack(
        [
            base,
            base[:, :250] + 0.3 * rng.normal(size=(40, 250)),
            base[:, :250] + 0.3 * rng.normal(size=(40, 250)),
        ]
    )
    found = signal_of(x)
    assert found.number <= 1
    assert found.effective_features < 700


def test_the_directions_span_the_planted_scores() -> None:
    rng = np.random.default_rng(8)
    scores = rng.normal(size=(40, 3))
    found = signal_of(scores @ rng.normal(size=(3, 800)) + rng.normal(size=(40, 800)))
    assert found.number == 3
    centred = scores - scores.mean(axis=0)
    kept = found.directions @ (found.directions.T @ centred)
    assert np.sum(kept**2) / np.sum(centred**2) > 0.98


@pytest.mark.parametrize("n", [2, 3, 6])
def test_few_samples_can_tell_nothing(n: int) -> None:
    found = signal_of(np.random.default_rng(0).normal(size=(n, 50)))
    assert (found.number, found.most, found.p_values.size) == (0, 0, 0)


def test_a_smooth_course_is_never_all_components() -> None:
    """Every component of smooth curves stands out of the rest; half the directions are kept for the noise."""
    rng = np.random.default_rng(9)
    time = np.linspace(0.0, 1.0, 24)[:, None]
    x = np.sin(time * rng.uniform(0, 20, 1000) + rng.uniform(0, 6, 1000)) + 0.01 * rng.normal(size=(24, 1000))
    found = signal_of(x)
    assert 5 <= found.number <= found.most == 11


def test_with_fewer_features_than_samples_parallel_analysis_holds_the_number_down() -> None:
    rng = np.random.default_rng(10)
    z = scaled(rng.normal(size=(200, 2)) @ rng.normal(size=(2, 20)) + rng.normal(size=(200, 20)))
    found = choose_number(z, random_state=1)
    assert found.number == 2 <= found.signal.number
    assert found.rule == NARROW_RULE != RULE


def test_components_of_the_signal_lie_in_its_space_and_the_others_outside() -> None:
    rng = np.random.default_rng(11)
    z = scaled(2.0 * rng.normal(size=(50, 2)) @ rng.normal(size=(2, 400)) + rng.normal(size=(50, 400)))
    found = choose_number(z, random_state=1)
    assert found.number == 2
    assert found.shares[:2].min() > 0.95
    assert found.shares[2:].max() < 0.3


def test_equal_seeds_give_equal_suggestions() -> None:
    z = scaled(factor_block(3, n=24, p=300).x)
    one, other = (choose_number(z, random_state=7) for _ in range(2))
    assert np.array_equal(one.parallel.limits, other.parallel.limits)
    assert np.array_equal(one.cross_validated.errors, other.cross_validated.errors)
