"""The sceptic's figures of chosen pairs."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import pearsonr, spearmanr

from workbench.engine.evidence.evidence import edge_evidence
from workbench.engine.nuisance import Nuisance


@pytest.fixture
def study():
    rng = np.random.default_rng(7)
    batch = (np.arange(30) % 3 == 1).astype(float)[:, None]
    return rng.normal(size=(30, 6)) + batch, rng.normal(size=(30, 5)) + batch, batch


PAIRS = np.array([0, 5, 2, 2]), np.array([4, 0, 1, 1])


def test_rank_correlation_without_nuisance_is_scipys(study):
    x, y, _ = study
    found = edge_evidence(x, y, *PAIRS).spearman
    assert_allclose(found, [spearmanr(x[:, a], y[:, b])[0] for a, b in zip(*PAIRS, strict=True)], atol=1e-12)


def test_leaving_one_out_in_closed_form_equals_refitting(study):
    x, y, batch = study
    found = edge_evidence(x, y, *PAIRS, nuisance=batch).without_one
    for value, a, b in zip(found, *PAIRS, strict=True):
        refits = []
        for t in range(30):
            keep = np.arange(30) != t
            removed = Nuisance.of(batch[keep], 29)
            refits.append(pearsonr(removed.residuals(x[keep, a]), removed.residuals(y[keep, b]))[0])
        assert_allclose(value, min(refits, key=abs), atol=1e-12)


def test_a_correlation_that_rests_on_one_sample_falls_when_it_is_left_out():
    rng = np.random.default_rng(1)
    x, y = rng.normal(size=(40, 1)), rng.normal(size=(40, 1))
    x[3] = y[3] = 30.0
    pair = np.array([0])
    assert pearsonr(x[:, 0], y[:, 0])[0] > 0.9
    assert abs(edge_evidence(x, y, pair, pair).without_one[0]) < 0.4


def test_a_sample_that_the_nuisance_fits_alone_changes_nothing():
    rng = np.random.default_rng(2)
    x, y = rng.normal(size=(12, 1)), rng.normal(size=(12, 1))
    alone = np.eye(12)[:, :1]
    pair = np.array([0])
    found = edge_evidence(x, y, pair, pair, nuisance=alone).without_one[0]
    rest = edge_evidence(x[1:], y[1:], pair, pair).without_one[0]
    assert abs(found - rest) < 1e-12


def test_imputed_cells_are_left_out_and_counted(study):
    x, y, batch = study
    mask_x, mask_y = np.zeros(x.shape, bool), np.zeros(y.shape, bool)
    mask_x[:4, 0] = True
    mask_y[2:6, 4] = True
    found = edge_evidence(x, y, *PAIRS, nuisance=batch, x_imputed=mask_x, y_imputed=mask_y)
    keep = slice(6, None)
    removed = Nuisance.of(batch[keep], 24)
    expected = pearsonr(removed.residuals(x[keep, 0]), removed.residuals(y[keep, 4]))[0]
    assert_allclose(found.observed[0], expected, atol=1e-12)
    assert_allclose(found.imputed_share, [0.2, 0.0, 0.0, 0.0], atol=1e-12)


def test_a_pair_that_is_nearly_all_imputed_has_no_observed_correlation():
    rng = np.random.default_rng(3)
    x, y = rng.normal(size=(10, 1)), rng.normal(size=(10, 1))
    mask = np.ones((10, 1), bool)
    mask[:4] = False
    pair = np.array([0])
    assert np.isnan(edge_evidence(x, y, pair, pair, x_imputed=mask).observed[0])


def test_constant_features_give_missing_correlations_and_no_warning():
    x, y = np.ones((8, 1)), np.arange(8.0)[:, None]
    pair = np.array([0])
    found = edge_evidence(x, y, pair, pair)
    assert np.isnan(found.spearman[0])
    assert found.without_one[0] == 0.0


def test_inputs_are_left_as_they_were(study):
    x, y, batch = study
    before = x.copy(), y.copy(), batch.copy()
    edge_evidence(x, y, *PAIRS, nuisance=batch)
    for kept, now in zip(before, study, strict=True):
        assert_allclose(now, kept, atol=0)


def test_a_feature_that_varies_in_one_sample_alone_has_nothing_left_without_it():
    x, y = np.zeros((9, 1)), np.arange(9.0)[:, None]
    x[8] = 1.0
    pair = np.array([0])
    assert edge_evidence(x, y, pair, pair).without_one[0] == 0.0
