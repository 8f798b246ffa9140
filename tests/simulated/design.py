"""What a simulated study is made of: its samples, its blocks, and what the blocks share."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

VALUES = ("counts", "proportions", "intensities", "log", "continuous", "mixed")


@dataclass(frozen=True)
class Block:
    """One block to be simulated; effects are in standard deviations of a feature's own noise.

    Parameters
    ----------
    name, layer, values
        Words of the project: block name, biological kind, and one of `VALUES`.
    features
        Number of columns.
    module_size
        Features that follow each shared module; 0: the block takes no part in them.
    private_factors, private_strength
        Number of factors that this block alone has, and the standard deviation of their sum.
    group_effect, group_share
        Shift of every group against the first (random sign), on that share of the features.
    depth, silent, closed
        Counts and proportions: median count of a feature; share of the features (outside modules) that are
        hardly ever seen; whether a sample's features compete for one total.
    technical
        Measurement noise of intensities, in the same unit as all effects (counts have Poisson noise instead).
    dilution, drift
        Standard deviation of the samples' log scale; loss over the run order (adds a column `NAME_order`).
    gaps
        Share of missing cells; of intensities and log ratios, four in five because they are low.
    tails
        Degrees of freedom of Student-t noise; infinity is Gaussian noise (gamma noise for counts).
    duplicates
        Features that are near copies of another one, such as adducts or isoforms.
    clusters, cluster_strength
        Size of the groups into which all features are dealt at random, and the loading (random sign) of each
        feature on the factor that its group alone has; 0: no such groups. The oracle does not know them.
    overlap, nested
        Features of each module that follow the next module as well, as strongly; and the loading (random sign) of
        each module's features on a factor that this block's part of the module alone has. The oracle does not know
        these factors.
    lacking, odd
        Number of samples that the block lacks, and of samples whose row has gone wrong.
    swaps
        Lengths of the cycles of exchanged tubes: `(2,)` is one exchanged pair, `(2, 3)` a pair and a cycle.
    days
        Run days of this assay alone (adds a column `NAME_day`); 0: it follows the study's run days.
    file
        Name of the delivered table; a `.tsv` has features in rows, a `.csv` samples in rows.
    """

    name: str
    layer: str
    values: str
    features: int
    module_size: int = 0
    private_factors: int = 0
    private_strength: float = 1.0
    group_effect: float = 0.0
    group_share: float = 0.2
    depth: float = 1000.0
    silent: float = 0.0
    closed: bool = False
    technical: float = 0.0
    dilution: float = 0.3
    drift: float = 0.0
    gaps: float = 0.0
    tails: float = math.inf
    duplicates: int = 0
    clusters: int = 0
    cluster_strength: float = 1.0
    overlap: int = 0
    nested: float = 0.0
    lacking: int = 0
    odd: int = 0
    swaps: tuple[int, ...] = ()
    days: int = 0
    file: str = ""

    @property
    def counted(self) -> bool:
        """Whether the values come from counting."""
        return self.values in ("counts", "proportions")


def transcripts(**changes: Any) -> Block:
    """Return the sequencing block of the reference family: 3,000 counts, five strong private factors."""
    block = Block("transcripts", "transcripts", "counts", 3000, module_size=60, file="counts.tsv")
    return replace(block, **{"private_factors": 5, "private_strength": 1.15, "silent": 0.1} | changes)


def metabolites(**changes: Any) -> Block:
    """Return the mass-spectrometry block of the reference family: 250 intensities with gaps, three factors."""
    block = Block("metabolites", "metabolites", "intensities", 250, module_size=12, file="metabolites.csv")
    usual = {"private_factors": 3, "private_strength": 1.15, "gaps": 0.04, "drift": 0.3}
    return replace(block, **usual | changes)


def proteins(**changes: Any) -> Block:
    """Return a block of log ratios."""
    block = Block("proteins", "proteins", "log", 400, module_size=20, private_factors=3, file="proteins.tsv")
    return replace(block, **{"gaps": 0.03} | changes)


def microbes(**changes: Any) -> Block:
    """Return a composition: sparse counts that compete for the sample's total."""
    block = Block(
        "microbes", "microbes", "counts", 150, module_size=10, private_factors=2, file="microbes.tsv"
    )
    return replace(block, **{"depth": 5.0, "closed": True} | changes)


def clinical(**changes: Any) -> Block:
    """Return a block of clinical readings: numbers, yes or no, and three-level text."""
    block = Block("clinical", "clinical", "mixed", 40, module_size=4, private_factors=1, file="clinical.csv")
    return replace(block, **{"gaps": 0.03} | changes)


@dataclass(frozen=True)
class Design:
    """A study to be simulated.

    Parameters
    ----------
    n
        Biological samples, all visits of all subjects together.
    blocks
        The layers' tables.
    modules, strength
        Number of shared modules, and the mean |loading| of their features in noise standard deviations.
    groups, group_by
        Group names, the first is the reference, none: no group; dealt to the `"subject"` or to the `"visit"`.
    run_days, day_effect, tangle
        Number of run days, the standard deviation of their shifts, and the share of samples that are run on a
        day of their own group alone: 0 crosses run days with groups, 1 tangles them completely.
    visits, subject_share, autocorrelation, trend
        Samples of each subject; the share of noise and factors that belongs to the subject; the correlation of
        the rest from one visit to the next; the strength of a time course that all subjects have in common.
    odd
        Samples that have gone wrong in every block, as a haemolysed tube does.
    """

    n: int = 96
    blocks: tuple[Block, ...] = (transcripts(), metabolites())
    modules: int = 4
    strength: float = 1.0
    groups: tuple[str, ...] = ("control", "treated")
    group_by: str = "subject"
    run_days: int = 3
    day_effect: float = 0.5
    tangle: float = 0.0
    visits: int = 1
    subject_share: float = 0.0
    autocorrelation: float = 0.0
    trend: float = 0.0
    odd: int = 0

    def __post_init__(self) -> None:
        if self.n % self.visits:
            raise ValueError(f"n = {self.n} samples cannot be dealt to subjects of {self.visits} visits each")
        for block in self.blocks:
            self._check(block)

    def _check(self, block: Block) -> None:
        """Refuse a block that has less room than is asked of it."""
        if block.values not in VALUES:
            raise ValueError(f"block {block.name!r}: values {block.values!r}; allowed: {', '.join(VALUES)}")
        if self.modules * block.module_size + block.duplicates > block.features:
            raise ValueError(
                f"block {block.name!r}: {block.features} features have no room for its modules and copies"
            )
        if sum(block.swaps) + block.odd + block.lacking + self.odd > self.n:
            raise ValueError(f"block {block.name!r}: more swapped, odd and lacking samples than n = {self.n}")

    def with_block(self, name: str, **changes: Any) -> Design:
        """Return the design with one block changed."""
        blocks = tuple(replace(block, **changes) if block.name == name else block for block in self.blocks)
        return replace(self, blocks=blocks)

    def block_pairs(self) -> tuple[tuple[int, int], ...]:
        """Return the positions of the block pairs that are screened: those of two different layers."""
        places = range(len(self.blocks))
        pairs = ((a, b) for a in places for b in places if a < b)
        return tuple((a, b) for a, b in pairs if self.blocks[a].layer != self.blocks[b].layer)
