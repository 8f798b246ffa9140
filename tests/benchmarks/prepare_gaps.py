"""What each choice for gaps does to recall, and to studies in which two layers share nothing.

Run ``python tests/benchmarks/prepare_gaps.py [STUDIES] [FAMILY ...]``. Studies and recall as in
``prepare_recall.py``; the second layer's gaps are filled by each choice of ``gaps`` in turn. Given, per family and
choice: mean recall and its difference to ``draws`` with the standard error over studies; the share of false pairs
among those with q <= 0.05; the share of studies with such a false pair; the share of p under 0.001, in thousandths.

Measured (40 studies each, seeds 0 to 39; recall, share of false pairs at q <= 0.05):

========================================  =============  =============  =============
family                                    draws          evidence       neighbours
========================================  =============  =============  =============
gaps in 25 %                              0.374, 0.061   0.432, 0.057   0.323, 0.058
gaps in 40 %                              0.255, 0.058   0.327, 0.055   0.211, 0.060
24 samples, gaps in 25 %                  0.312, 0.053   0.389, 0.053   0.220, 0.059
120 samples, gaps in 25 %                 0.248, 0.048   0.288, 0.050   0.225, 0.050
proteins, gaps in 15 % (no limit seen)    0.500, 0.055   0.500, 0.055   0.500, 0.055
nothing shared, gaps in 40 %              -, 0.050       -, 0.050       -, 0.050
nothing shared, 24 samples                -, 0.100       -, 0.100       -, 0.100
========================================  =============  =============  =============

Standard errors of the gains are 0.004 to 0.007. Tried and left: draws conditional on four components of the block
(+0.014, +0.008 and -0.000 over marginal draws in the first, third and fourth family), and expected values conditional
on them (+0.007 over the ones used, within their error): neither pays for a second model of the block.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
from scipy import stats

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))
sys.path.insert(0, str(Path(__file__).resolve().parent))

from prepare_recall import BIG, SMALL, delivered, recall, unit_residuals
from prepare_recall import Family as Studies
from simulated import Design, Study, metabolites, proteins, simulate, transcripts

from workbench.prepare import recipe_for
from workbench.settings import prepare_settings

CHOICES = ("draws", "evidence", "neighbours")
LONE = {"module_size": 0, "private_strength": 2.0}
FAMILIES = {
    "gaps in 25 %": Design(
        n=60, strength=1.5, blocks=(transcripts(**BIG), metabolites(**SMALL | {"gaps": 0.25}))
    ),
    "gaps in 40 %": Design(
        n=60, strength=1.5, blocks=(transcripts(**BIG), metabolites(**SMALL | {"gaps": 0.4}))
    ),
    "24 samples, gaps in 25 %": Design(
        n=24, strength=2.5, run_days=1, blocks=(transcripts(**BIG), metabolites(**SMALL | {"gaps": 0.25}))
    ),
    "120 samples, gaps in 25 %": Design(
        n=120, strength=1.0, blocks=(transcripts(**BIG), metabolites(**SMALL | {"gaps": 0.25}))
    ),
    "proteins, gaps in 15 %": Design(
        n=60, strength=1.5, blocks=(transcripts(**BIG), proteins(features=250, gaps=0.15))
    ),
    "nothing shared, gaps in 40 %": Design(
        n=60, modules=0, blocks=(transcripts(**BIG | LONE), metabolites(**SMALL | LONE | {"gaps": 0.4}))
    ),
    "nothing shared, 24 samples, gaps in 40 %": Design(
        n=24,
        modules=0,
        run_days=1,
        blocks=(transcripts(**BIG | LONE), metabolites(**SMALL | LONE | {"gaps": 0.4})),
    ),
}


def figures(study: Study, x: np.ndarray, y: np.ndarray, columns: list[np.ndarray]) -> tuple[float, ...]:
    """Return recall, share of false pairs at q <= 0.05, whether there is one, share of p under 0.001 in thousandths."""
    left, right, rank = unit_residuals(study, x, y)
    r = (left.T @ right).ravel()
    freedom = len(x) - rank - 1
    p = 2.0 * stats.t.sf(np.abs(r) * np.sqrt(freedom / (1.0 - r**2)), freedom)
    names = tuple(block.name for block in study.design.blocks)
    true = np.zeros([block.features for block in study.design.blocks], dtype=bool)
    true[tuple(study.truth.pairs[names].T)] = True
    passed = stats.false_discovery_control(p) <= 0.05
    false = passed & ~true[np.ix_(*columns)].ravel()
    found = recall(study, x, y, columns) if true.any() else float("nan")
    return found, false.sum() / max(passed.sum(), 1), float(false.any()), 1000.0 * float(np.mean(p < 0.001))


def one_study(design: Design, seed: int) -> np.ndarray:
    """Return the figures of every choice, (choices, figures)."""
    study = simulate(design, seed)
    smallest = int(study.samples["group"].value_counts().min())
    one, other = delivered(study, Studies(design))
    x = recipe_for("transcripts", "counts").fit_transform(one, smallest_group=smallest, seed=1)
    rows, block = [], design.blocks[1]
    for choice in CHOICES:
        settings = prepare_settings(block.layer, block.values, {"gaps": choice})
        y = recipe_for(block.layer, block.values, settings).fit_transform(
            other, smallest_group=smallest, seed=1
        )
        pairs = ((one, x), (other, y))
        columns = [np.array([table.features.index(name) for name in made.features]) for table, made in pairs]
        rows.append(figures(study, x.values, y.values, columns))
    return np.array(rows)


def main(studies: int, names: list[str]) -> None:
    """Print a line for each family and choice."""
    for name in names or FAMILIES:
        found = np.array([one_study(FAMILIES[name], seed) for seed in range(studies)])
        for k, choice in enumerate(CHOICES):
            gain = found[:, k, 0] - found[:, 0, 0]
            means = found[:, k].mean(axis=0)
            print(
                f"{name:<40} {choice:<10} recall {means[0]:.3f}, {gain.mean():+.3f} "
                f"({gain.std(ddof=1) / np.sqrt(studies):.3f})   false at q <= 0.05 {means[1]:.3f}   "
                f"studies with a false one {means[2]:.3f}   p < 0.001 {means[3]:.2f}",
                flush=True,
            )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 40, sys.argv[2:])
