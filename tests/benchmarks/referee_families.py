"""The families of simulated studies that the screen is judged by: what is shared, what hides it, what may mislead."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Literal

from simulated import Block, Design, clinical, metabolites, microbes, proteins, transcripts

Level = Literal["samples", "changes", "subjects", "visits"]

NULL_STUDIES, OTHER_STUDIES = 400, 100


@dataclass(frozen=True)
class Family:
    """A kind of study.

    Parameters
    ----------
    design
        What the simulator is asked for.
    level
        What a row of the screen is: a sample, a subject's change between two visits, or a subject's mean; or
        `"visits"`: changes within subjects over all their visits, by the screen for repeated measures. By hand these
        samples are pooled, with the visit and the subject removed.
    correlation
        ``"pearson"`` or ``"spearman"``.
    """

    design: Design
    level: Level = "samples"
    correlation: Literal["pearson", "spearman"] = "pearson"

    @property
    def null(self) -> bool:
        """Whether nothing is shared, so that every edge is false."""
        return self.design.modules == 0

    @property
    def studies(self) -> int:
        """Studies of a whole campaign."""
        return NULL_STUDIES if self.null else OTHER_STUDIES


def two(**changes: object) -> tuple[Block, Block]:
    """Return the two blocks of the reference family, both changed in the same way."""
    return transcripts(**changes), metabolites(**changes)


def quiet(**changes: object) -> tuple[Block, Block]:
    """Return the two blocks without private variation."""
    return two(private_factors=0, **changes)


def readings(name: str, features: int, module: int, factors: int, **changes: object) -> Block:
    """Return a block of plain numbers whose population correlations are known."""
    block = Block(name, name, "continuous", features, module, factors, private_strength=1.15, dilution=0.0)
    return replace(block, **changes)  # type: ignore[arg-type]


def known(**changes: object) -> tuple[Block, Block]:
    """Return two blocks of plain numbers."""
    return readings("first", 1500, 40, 5, **changes), readings("second", 250, 12, 3, **changes)


def small() -> tuple[Block, Block]:
    """Return narrow blocks whose modules are about as strong as the one private factor of each."""
    return (
        transcripts(features=120, module_size=15, private_factors=1),
        metabolites(features=40, module_size=6, private_factors=1),
    )


def overlapping(one: int, other: int) -> tuple[Block, Block]:
    """Return two blocks in which so many features of each module follow the next module too."""
    return transcripts(overlap=one), metabolites(overlap=other)


def mixing() -> tuple[Block, Block]:
    """Return narrow blocks with several modules of few features, of which components are mixtures."""
    return (
        proteins(features=120, module_size=8, private_factors=1),
        metabolites(features=40, module_size=4, private_factors=1),
    )


def dense(one: int, other: int, first: float, second: float) -> tuple[Block, Block]:
    """Return two blocks with modules of ``one`` and ``other`` features under private factors of those strengths."""
    return (
        readings("first", 1500, one, 2, private_strength=first),
        readings("second", 250, other, 2, private_strength=second),
    )


def _sizes(name: str, sizes: tuple[int, ...], make: Callable[[int], Family]) -> dict[str, Family]:
    return {f"{name}-{n}": make(n) for n in sizes}


ALL = (12, 24, 48, 96, 200)
NOTHING = {
    **_sizes("nothing", ALL, lambda n: Family(Design(n=n, modules=0, blocks=quiet()))),
    **_sizes(
        "nothing-private",
        (24, 48, 96, 200),
        lambda n: Family(Design(n=n, modules=0, blocks=two(private_strength=2.0))),
    ),
    "nothing-odd-48": Family(Design(n=48, modules=0, blocks=two(), odd=1)),
    "nothing-small-30": Family(Design(n=30, modules=0, blocks=small(), run_days=2)),
    "nothing-private-30": Family(
        Design(n=30, modules=0, run_days=1, blocks=two(private_strength=2.0, drift=0.0))
    ),
    **_sizes(
        "nothing-group",
        (12, 24, 48, 96),
        lambda n: Family(Design(n=n, modules=0, blocks=two(group_effect=3.0, group_share=0.5))),
    ),
    **_sizes(
        "nothing-tangled",
        (24, 48, 96),
        lambda n: Family(Design(n=n, modules=0, tangle=0.5, day_effect=1.0, blocks=two(group_effect=1.5))),
    ),
    **_sizes(
        "nothing-tails", (24, 48, 96, 200), lambda n: Family(Design(n=n, modules=0, blocks=two(tails=3.0)))
    ),
    "nothing-tails-plain-96": Family(Design(n=96, modules=0, blocks=known(tails=3.0))),
    **_sizes("nothing-clusters", (48, 96), lambda n: Family(Design(n=n, modules=0, blocks=two(clusters=10)))),
    "nothing-gaps-48": Family(Design(n=48, modules=0, blocks=(transcripts(), metabolites(gaps=0.25)))),
    "nothing-composition-48": Family(Design(n=48, modules=0, blocks=(microbes(), metabolites()))),
    "nothing-composition-96": Family(Design(n=96, modules=0, blocks=(microbes(), metabolites()))),
    "nothing-lacking-96": Family(Design(n=96, modules=0, blocks=(transcripts(), metabolites(lacking=19)))),
    "nothing-three-60": Family(Design(n=60, modules=0, blocks=(*two(), proteins()))),
    "nothing-clinical-60": Family(Design(n=60, modules=0, blocks=(proteins(), clinical()))),
    "nothing-pairs-60": Family(
        Design(n=60, modules=0, visits=2, subject_share=0.5, group_by="visit", blocks=two()), "changes"
    ),
    "nothing-trend-120": Family(
        Design(n=120, modules=0, visits=4, subject_share=0.3, autocorrelation=0.6, trend=1.0, blocks=two()),
        "subjects",
    ),
    "nothing-visits-100": Family(
        Design(n=100, modules=0, visits=5, subject_share=0.3, autocorrelation=0.6, trend=1.0, blocks=two()),
        "visits",
    ),
    "nothing-spearman-48": Family(Design(n=48, modules=0, blocks=two()), correlation="spearman"),
    "nothing-spearman-tails-96": Family(
        Design(n=96, modules=0, blocks=two(tails=3.0)), correlation="spearman"
    ),
}

MIDDLE = (28, 30, 36)
POOR = replace(proteins(), module_size=0)
SOMETHING = {
    "modules-1.0-96": Family(Design(n=96, strength=1.0)),
    "modules-1.4-96": Family(Design(n=96, strength=1.4)),
    "modules-1.4-48": Family(Design(n=48, strength=1.4)),
    "modules-2.0-24": Family(Design(n=24, strength=2.0)),
    "modules-3.0-12": Family(Design(n=12, strength=3.0)),
    "modules-0.7-200": Family(Design(n=200, strength=0.7)),
    "modules-1.0-200": Family(Design(n=200, strength=1.0)),
    **_sizes("modules-1.8", MIDDLE, lambda n: Family(Design(n=n, strength=1.8))),
    "quiet-1.2-48": Family(Design(n=48, strength=1.2, blocks=quiet())),
    "private-1.4-96": Family(Design(n=96, strength=1.4, blocks=two(private_strength=2.0))),
    "group-1.2-60": Family(Design(n=60, strength=1.2, blocks=two(group_effect=2.0, group_share=0.5))),
    "tangled-1.2-60": Family(
        Design(n=60, strength=1.2, tangle=0.5, day_effect=1.0, blocks=two(group_effect=1.5))
    ),
    "tails-1.4-48": Family(Design(n=48, strength=1.4, blocks=two(tails=3.0))),
    "tails-1.2-96": Family(Design(n=96, strength=1.2, blocks=two(tails=3.0))),
    "odd-1.4-60": Family(Design(n=60, strength=1.4, blocks=two(), odd=1)),
    "clusters-1.2-60": Family(Design(n=60, strength=1.2, blocks=two(clusters=10))),
    "gaps-1.2-60": Family(Design(n=60, strength=1.2, blocks=(transcripts(), metabolites(gaps=0.25)))),
    "composition-1.2-96": Family(Design(n=96, strength=1.2, blocks=(microbes(), metabolites()))),
    "lacking-1.2-96": Family(Design(n=96, strength=1.2, blocks=(transcripts(), metabolites(lacking=19)))),
    "rich-and-poor-60": Family(Design(n=60, strength=1.4, blocks=(*two(), POOR))),
    "three-1.2-60": Family(Design(n=60, strength=1.2, blocks=(*two(), proteins()))),
    "clinical-1.2-96": Family(Design(n=96, strength=1.2, blocks=(proteins(), clinical()))),
    "pairs-2.0-96": Family(
        Design(n=96, strength=2.0, visits=2, subject_share=0.5, group_by="visit", blocks=two()), "changes"
    ),
    "trend-2.0-240": Family(
        Design(
            n=240, strength=2.0, visits=5, subject_share=0.5, autocorrelation=0.6, trend=1.0, blocks=two()
        ),
        "subjects",
    ),
    "visits-2.0-100": Family(
        Design(
            n=100, strength=2.0, visits=5, subject_share=0.3, autocorrelation=0.6, trend=1.0, blocks=two()
        ),
        "visits",
    ),
    "spearman-1.4-60": Family(Design(n=60, strength=1.4), correlation="spearman"),
    "dense-equal-60": Family(Design(n=60, strength=0.7, modules=2, blocks=dense(500, 80, 0.8, 0.8))),
    "dense-equal-200": Family(Design(n=200, strength=0.5, modules=2, blocks=dense(500, 80, 0.6, 0.6))),
    "dense-mixed-200": Family(Design(n=200, strength=0.6, modules=2, blocks=dense(300, 12, 0.6, 1.0))),
    "dense-strong-96": Family(Design(n=96, strength=1.5, modules=2, blocks=dense(500, 80, 1.0, 1.0))),
    **_sizes(
        "small-2.5",
        (24, 30, 40, 60),
        lambda n: Family(Design(n=n, blocks=small(), modules=2, strength=2.5, run_days=2)),
    ),
    "small-1.5-40": Family(Design(n=40, blocks=small(), modules=2, strength=1.5, run_days=2)),
    "small-1.0-96": Family(Design(n=96, blocks=small(), modules=2, strength=1.0, run_days=2)),
    "overlap-1.2-96": Family(Design(n=96, strength=1.2, blocks=overlapping(20, 4))),
    "overlap-1.4-48": Family(Design(n=48, strength=1.4, blocks=overlapping(30, 6))),
    "few-1.4-60": Family(Design(n=60, strength=1.4, blocks=(transcripts(), metabolites(module_size=3)))),
    "few-1.0-200": Family(Design(n=200, strength=1.0, blocks=(transcripts(), metabolites(module_size=3)))),
    "mixing-1.4-48": Family(Design(n=48, strength=1.4, blocks=mixing())),
    "mixing-1.2-120": Family(Design(n=120, strength=1.2, blocks=mixing())),
    "nested-1.2-60": Family(Design(n=60, strength=1.2, blocks=two(nested=1.0))),
    "nested-1.0-200": Family(Design(n=200, strength=1.0, blocks=two(nested=1.5))),
    "intervals-1.2-48": Family(Design(n=48, strength=1.2, blocks=known())),
    "intervals-0.9-96": Family(Design(n=96, strength=0.9, blocks=known())),
}

FAMILIES = NOTHING | SOMETHING
