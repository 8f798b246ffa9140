"""Figures of findings show what the finding says, and are the same bytes twice."""

from __future__ import annotations

import numpy as np
import pytest

from workbench.checks import Finding
from workbench.checks.evidence import (
    CrossTable,
    FeatureShares,
    GapShares,
    RunFigures,
    SamplePlane,
    SampleValues,
    ScoresByColumn,
    TwoSamples,
    ValueSpread,
)
from workbench.checks.swapped import SwapPicture
from workbench.figures import figure_bytes
from workbench.figures.findings import DRAWERS, draw_findings, figure_file

RNG = np.random.default_rng(1)
NAMES = tuple(f"S$_{k}$" for k in range(20))
EVIDENCE = [
    SampleValues(NAMES, np.append(RNG.lognormal(size=18), [np.nan, 0.0]), "depth", (3,), 3.0, log_scale=True),
    SampleValues(NAMES, RNG.random(20), "share", (0, 19), 0.5),
    SamplePlane(NAMES, RNG.normal(size=20), RNG.normal(size=20), ("component 1", "component 2"), (7,)),
    ScoresByColumn("$day$", RNG.normal(size=20), np.append(np.arange(19) % 3, np.nan), ("a", "b", "c"), "component"),
    ScoresByColumn("order", RNG.normal(size=20), np.arange(20.0), (), "component 1"),
    CrossTable("group", ("control", "treated"), "day", ("1", "2", "3"), np.array([[4, 0, 1], [0, 5, 0]])),
    TwoSamples(("S1", "S2"), RNG.lognormal(5, 2, 50), RNG.lognormal(5, 2, 50), "measured value"),
    TwoSamples(("S1", "S2"), RNG.normal(size=50), np.full(50, np.nan), "value"),
    ValueSpread(RNG.lognormal(5, 3, 200), "log", "values of lcms"),
    ValueSpread(np.full(5, 2.0), "log", "values of lcms"),
    GapShares("day", ("a", "b"), ("f1", "f2"), np.array([[0.0, 1.0], [0.5, np.nan]])),
    RunFigures(np.arange(6.0), RNG.normal(size=6), ("pool", "sample") * 3, "mean log2"),
    FeatureShares(RNG.random(100), 0.3, "relative standard deviation"),
    SwapPicture(
        NAMES, RNG.normal(size=20), RNG.normal(size=20), (2, 5), np.zeros(2), np.ones(2), ("expected", "score")
    ),
]  # fmt: skip


def finding(evidence, identity="check-block"):
    return Finding(identity, "check", "warning", "block", "what was found", evidence=evidence)


@pytest.mark.parametrize("evidence", EVIDENCE, ids=lambda evidence: type(evidence).__name__)
def test_every_kind_of_evidence_is_drawn_the_same_twice(evidence):
    (one,), (two,) = draw_findings([finding(evidence)]), draw_findings([finding(evidence)])
    assert (one.name, one.caption) == ("check-block", "what was found.")
    assert one.figure.axes[0].has_data()
    assert figure_bytes(one, "svg") == figure_bytes(two, "svg")
    assert figure_bytes(one, "png").startswith(b"\x89PNG")


def test_every_drawer_is_tested_here():
    assert {type(evidence) for evidence in EVIDENCE} == set(DRAWERS)


def test_the_samples_of_the_finding_are_named_in_the_figure():
    (drawing,) = draw_findings([finding(EVIDENCE[1])])
    texts = {text.get_text() for text in drawing.figure.axes[0].texts}
    assert {NAMES[0], NAMES[19]} <= texts


def test_a_table_shows_its_counts():
    (drawing,) = draw_findings([finding(EVIDENCE[5])])
    assert sorted(text.get_text() for text in drawing.figure.axes[0].texts) == list("000145")


def test_a_finding_without_evidence_has_no_figure():
    assert draw_findings([finding(None), finding("a text")]) == ()


def test_long_ids_become_file_names_that_differ():
    one, two = figure_file("gaps-" + 300 * "a"), figure_file("gaps-" + 301 * "a")
    assert one != two
    assert max(len(one), len(two)) < 120
