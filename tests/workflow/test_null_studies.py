"""Studies whose layers share nothing: preparation and screen give an edge no more often than chance allows."""

from __future__ import annotations

from typing import Any

import pytest
from scipy import stats
from screened import screen_study
from simulated import Design, metabolites, proteins, simulate, transcripts

N_STUDIES = 50
LEVEL = 0.01


def counts(**changes: Any) -> Any:
    """Return 600 counts with moderate private variation."""
    return transcripts(**{"features": 600, "module_size": 0, "private_strength": 0.6} | changes)


def intensities(**changes: Any) -> Any:
    """Return 120 intensities with moderate private variation."""
    return metabolites(**{"features": 120, "module_size": 0, "private_strength": 0.6} | changes)


PLAIN = Design(n=48, blocks=(counts(), intensities()), modules=0)

FAMILIES = {
    "many gaps": (Design(n=48, blocks=(counts(), intensities(gaps=0.2)), modules=0), "pearson"),
    "lacking samples": (
        Design(n=48, blocks=(counts(lacking=3), intensities(lacking=5)), modules=0),
        "pearson",
    ),
    "tangled": (Design(n=48, blocks=PLAIN.blocks, modules=0, tangle=0.7), "pearson"),
    "small": (Design(n=24, blocks=PLAIN.blocks, modules=0), "pearson"),
    "log ratios": (
        Design(n=48, blocks=(proteins(features=300, module_size=0), intensities()), modules=0),
        "pearson",
    ),
    "group in both": (
        Design(n=48, blocks=(counts(group_effect=2.0), intensities(group_effect=2.0)), modules=0),
        "pearson",
    ),
    "three layers": (
        Design(n=48, blocks=(*PLAIN.blocks, proteins(features=200, module_size=0)), modules=0),
        "pearson",
    ),
    "ranks": (PLAIN, "spearman"),
    "heavy tails, ranks": (
        Design(n=48, blocks=(counts(tails=4.0), intensities(tails=4.0)), modules=0),
        "spearman",
    ),
    "odd sample, ranks": (Design(n=48, blocks=PLAIN.blocks, modules=0, odd=1), "spearman"),
}
"""What a study can have besides sharing nothing, and the correlation that is to hold under it."""


def studies_with_an_edge(design: Design, correlation: str = "pearson", n_studies: int = N_STUDIES) -> int:
    """Return how many of the studies with seeds 0, 1, ... have an edge at 5 %."""
    screens = (screen_study(simulate(design, seed), correlation).screen for seed in range(n_studies))
    return sum(screen.n_edges > 0 for screen in screens)


def chance(hits: int, n_studies: int = N_STUDIES) -> float:
    """Return the probability of so many studies with an edge, or more, when each has one with 5 %."""
    return float(stats.binom.sf(hits - 1, n_studies, 0.05))


def test_null_studies_have_an_edge_no_more_often_than_chance() -> None:
    """Fifty studies of 600 counts and 120 intensities with gaps, run on three days (one-sided binomial, 0.01)."""
    assert chance(studies_with_an_edge(PLAIN)) >= LEVEL


@pytest.mark.slow
def test_no_family_of_null_studies_has_edges_too_often() -> None:
    """Fifty studies of each family; one-sided binomial with Holm over all families, 0.01 together."""
    hits = {name: studies_with_an_edge(design, kind) for name, (design, kind) in FAMILIES.items()}
    smallest = min(chance(count) for count in hits.values())
    assert smallest * len(hits) >= LEVEL, hits


def test_run_days_left_in_are_noticed() -> None:
    """The check can fail: without the run days as nuisance, nearly every study has edges."""
    design = Design(n=48, blocks=PLAIN.blocks, modules=0, day_effect=1.5)
    assert studies_with_an_edge(design, n_studies=10) <= 3
    hidden = [screen_study(simulate(design, seed), hide=("run_day",)).screen.n_edges for seed in range(10)]
    assert sum(count > 0 for count in hidden) >= 9


def test_one_odd_sample_makes_edges_by_pearson() -> None:
    """A known limit, and why ranks are there: one sample that went wrong in both layers ties them."""
    design, kind = FAMILIES["odd sample, ranks"]
    assert kind == "spearman"
    assert studies_with_an_edge(design, "pearson", n_studies=10) >= 8
    assert studies_with_an_edge(design, "spearman", n_studies=10) <= 3
