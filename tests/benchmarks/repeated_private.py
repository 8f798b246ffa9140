"""Private variation removed where subjects have several samples: realised rate and recall, with and without.

``python tests/benchmarks/repeated_private.py [--studies 200] [--first 0] [--family NAME]`` prints one line for each
family as it is done. Families of the referee (at the level at which a project would screen them) and those of
``repeated_calibration``, 300 x 100 features.

Measured, 400 studies a family, seeds 0 to 399, nominal 5 %, numpy 2.4. Studies with any edge where nothing is shared:

    family                          without removal   with it
    nothing-pairs-60                      20             19
    nothing-trend-120 (means)             27             19
    nothing-visits-100                    18             22
    pairs, S=12 (too few: off)            25             25
    pairs, S=30                           20             31   (800 others: 23, 31)
    t3, pairs, S=30                       12             27   (800 others: 34, 43)
    odd sample, pairs, S=30               20              8   (800 others: 51, 13)
    white, 12 x 3                         16             15
    fall 0.6, 12 x 3                      17             14
    fall 0.6, 12 x 5                      12             27   (800 others: 37, 41)
    fall 0.9, 12 x 5                      10             21   (800 others: 36, 32)
    fall 0 to 0.9, 12 x 5                  7             15   (800 others: 36, 33)
    fall 0.6, 30 x 5                      23             26
    fall 0.9, 30 x 5                      25             19
    fall 0 to 0.9, 30 x 5                 22             11
    fall 0.9 and 0.2, 20 x 4              10             10
    fall 0 to 0.9, gaps, 20 x 5           14             14
    fall 0.6, strong private, 20 x 4       7             13
    fall 0.6, t5, 20 x 4                  17             21
    fall 0.6, t3, 20 x 4                  22             23
    fall 0.6, odd sample, 20 x 4          42             12
    all of 8,400                         386            392   (4.6 and 4.7 %)

One-sided with Holm at 0.01 none with removal is above 5 % (smallest p 0.011, pairs of 30 subjects); without it one
odd sample in 20 x 4 is (p 6e-6). Share of false edges and recall where something is shared:

    family                  without removal   with it
    pairs-2.0-96             0.049, 0.659      0.042, 0.852
    trend-2.0-240 (means)    0.054, 0.825      0.042, 0.980
    visits-2.0-100           0.048, 0.874      0.040, 0.969
    modules, 12 x 5          0.047, 0.985      0.029, 0.999
    modules, 20 x 4          0.047, 0.937      0.029, 0.998
    modules, 30 x 3          0.048, 0.943      0.029, 0.997
    modules, pairs S=30      0.049, 0.276      0.027, 0.418

Since then odd subjects are judged by what the other subjects' components leave of them. Again, 300 studies a family
(seeds 0 to 299) of all but the two of 12 x 3: 253 of 5,700 with removal (4.4 %) and 251 without, the highest 22
(fall 0.6, 30 x 5) and 21 (t3, pairs, S=30), 5 with one odd sample in 20 x 4 (15 without); modules, 12 x 5 0.029,
0.999; modules, pairs S=30 0.027, 0.430.
"""

from __future__ import annotations

import argparse
from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
import repeated_calibration
from referee_families import FAMILIES as REFEREE
from referee_families import Family
from simulated import Study, design_matrix, logs, simulate

from workbench.engine import BlockPair, SubjectDesign, screen_blocks
from workbench.engine.pairs.repeated import screen_repeated
from workbench.engine.pairs.subject_space import Level
from workbench.engine.private.private_variation import LayerBlock
from workbench.engine.private.repeated_layers import cleaned_repeated

KINDS: dict[str, Level] = {
    "nothing-pairs-60": "visits",
    "nothing-trend-120": "subjects",
    "nothing-visits-100": "visits",
    "pairs-2.0-96": "visits",
    "trend-2.0-240": "subjects",
    "visits-2.0-100": "visits",
}


@dataclass(frozen=True)
class Repeated:
    """A study as a screen of repeated samples takes it: the pair of blocks, the design, and the true pairs."""

    pair: BlockPair
    design: SubjectDesign
    truth: np.ndarray
    level: Level


def referee_study(name: str, family: Family, seed: int) -> Repeated:
    """Return a study of the referee on a log scale, all its samples, with its nuisance."""
    study: Study = simulate(family.design, seed)
    ((a, b),) = study.design.block_pairs()
    first, second = study.design.blocks[a], study.design.blocks[b]
    tables = [logs(study, block) for block in (first, second)]
    known = study.samples.drop(columns=["visit", "group"])
    pair = BlockPair(name, *(table.to_numpy() for table in tables), design_matrix(known, *study.blocks))
    truth = np.zeros((first.features, second.features), dtype=bool)
    truth[tuple(study.truth.pairs[first.name, second.name].T)] = True
    design = SubjectDesign.of(study.samples["subject"].to_numpy(), study.samples["visit"].to_numpy())
    return Repeated(pair, design, truth, KINDS[name])


def course_study(name: str, family: repeated_calibration.Family, seed: int) -> Repeated:
    """Return a study of ``repeated_calibration``."""
    design, x, y, truth = repeated_calibration.study(family, seed)
    return Repeated(BlockPair(name, x, y), design, truth, "visits")


def studies(asked: str) -> Iterator[tuple[str, Callable[[int], Repeated]]]:
    """Yield each family whose name holds what was asked for, with what makes a study of a seed."""
    for name in KINDS:
        if asked in name:
            yield name, lambda seed, name=name: referee_study(name, REFEREE[name], seed)
    for name, family in repeated_calibration.FAMILIES.items():
        if asked in name:
            yield name, lambda seed, name=name, family=family: course_study(name, family, seed)


def figures(study: Repeated, seed: int) -> list[float]:
    """Return edges, share of false ones and recall: without removal, and with it; and the components removed."""
    plain = screen_repeated([study.pair], [study.design], study.level)
    made = cleaned_repeated(_layers(study.pair), [(0, 1)], study.design, study.level, seed=seed)
    cleaned = screen_blocks(made.pairs)
    removed = sum(one.removed for block in made.components for one in block)
    told = []
    for screen in (plain, cleaned):
        right = int(study.truth[screen.i, screen.j].sum())
        told += [screen.n_edges, 1.0 - right / max(screen.n_edges, 1) if screen.n_edges else 0.0]
        told += [right / study.truth.sum() if study.truth.any() else np.nan]
    return [*told, removed * (not made.off[0])]


def _layers(pair: BlockPair) -> tuple[LayerBlock, LayerBlock]:
    n = pair.x.shape[0]
    known = np.empty((n, 0)) if pair.nuisance is None else np.asarray(pair.nuisance)
    return tuple(
        LayerBlock(name, name, np.asarray(x), np.arange(n), known)
        for name, x in (("x", pair.x), ("y", pair.y))
    )


def main() -> None:
    """Run the families asked for."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--studies", type=int, default=200)
    parser.add_argument("--first", type=int, default=0)
    parser.add_argument("--family", default="")
    asked = parser.parse_args()
    for name, make in studies(asked.family):
        seeds = range(asked.first, asked.first + asked.studies)
        found = np.array([figures(make(seed), seed) for seed in seeds])
        print(f"{name:34s} {_line(found)}", flush=True)


def _line(found: np.ndarray) -> str:
    told = []
    for label, start in (("without", 0), ("removed", 3)):
        edges, wrong, recall = found[:, start : start + 3].T
        rate = f"fdr {wrong.mean():.4f} +- {wrong.std(ddof=1) / np.sqrt(len(found)):.4f} recall {recall.mean():.3f}"
        told.append(
            f"{label}: any {np.count_nonzero(edges)}/{len(found)}"
            if np.isnan(recall).all()
            else f"{label}: {rate}"
        )
    return "; ".join([*told, f"{found[:, 6].mean():.1f} removed"])


if __name__ == "__main__":
    main()
