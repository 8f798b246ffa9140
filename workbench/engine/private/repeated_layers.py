"""Repeated samples as independent rows, with the private variation of each block removed from it.

On the rows of :func:`~workbench.engine.pairs.subject_space.subject_space` private variation is found, told from what is
shared, and removed as between independent samples. A screen gives every two blocks a map of their own, since the
whitening rests on the average of the two (:mod:`workbench.engine.pairs.repeated`); what a block shares with a third
layer alone buries this pair's correlations like any other private variation, and goes too.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workbench.engine.pairs.mapped_block import MappedBlock
from workbench.engine.pairs.repeated import course_damping_of_rows, mapped_block
from workbench.engine.pairs.screen import BlockPair, Correlation
from workbench.engine.pairs.subject_space import Level, SubjectSpace, subject_space
from workbench.engine.private.private_components import FEWEST_DIMENSIONS
from workbench.engine.private.private_variation import LayerBlock, RealComponent, pairs_without_private
from workbench.engine.subjects import SubjectDesign
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class CleanedRepeated:
    """Blocks on independent rows, private variation removed.

    Attributes
    ----------
    pairs : tuple of BlockPair
        To be screened by Pearson's correlation.
    shared : tuple of (ndarray, ndarray)
        For each pair both blocks' shared components on the rows, as in
        :class:`~workbench.engine.private.private_variation.CleanedPairs`.
    places : tuple of (int, int)
        The positions of their blocks.
    space : SubjectSpace
        The map from samples to their rows.
    mapped : tuple of MappedBlock
        The blocks on these rows before private variation went.
    layers : tuple of LayerBlock
        The same in full, with the nuisance of the rows.
    components : tuple of tuple of RealComponent
        For each block its real components; their scores are on the rows.
    off : tuple of str
        For each pair why nothing was removed; empty where removal was on.
    steady : tuple of ndarray of shape (n_rows,)
        For each block what its rows were multiplied by, beside what ``mapped`` did; less than 1 for odd ones.
    """

    pairs: tuple[BlockPair, ...]
    shared: tuple[tuple[FloatArray, FloatArray], ...]
    places: tuple[tuple[int, int], ...]
    space: SubjectSpace
    mapped: tuple[MappedBlock, ...]
    layers: tuple[LayerBlock, ...]
    components: tuple[tuple[RealComponent, ...], ...]
    off: tuple[str, ...]
    steady: tuple[FloatArray, ...]


def cleaned_repeated(
    blocks: Sequence[LayerBlock],
    pairs: Sequence[tuple[int, int]],
    design: SubjectDesign,
    level: Level,
    correlation: Correlation = "pearson",
    *,
    seed: int = 0,
) -> CleanedRepeated:
    """Pairs of blocks on independent rows, private variation removed from each block.

    The damping of features of an unusual course is judged on what removal leaves of them.

    Parameters
    ----------
    blocks : sequence of LayerBlock
        All on the samples of ``design``, in their order. The union of their nuisance is removed.
    pairs : sequence of (int, int)
        Positions of blocks of two different layers.
    design, level, correlation
        As for :func:`~workbench.engine.pairs.repeated.screen_repeated`; ranks are taken here.
    seed : int
        For the number of components of narrow blocks.

    Raises
    ------
    NumericsError
        When a block has other samples, or as :func:`~workbench.engine.pairs.subject_space.subject_space`.
    """
    if any(not np.array_equal(block.rows, blocks[0].rows) for block in blocks):
        raise NumericsError(
            f"{', '.join(block.name for block in blocks)} have different samples; give those that all of them have"
        )
    nuisance = np.hstack([block.nuisance for block in blocks])
    space = subject_space([block.values for block in blocks], design, nuisance, level, correlation)
    rows, columns = np.arange(space.matrix.shape[0]), space.nuisance.basis[:, 1:]
    mapped = tuple(mapped_block(block.values, design, space, level, correlation) for block in blocks)
    layers = tuple(
        replace(block, values=seen[:, :], rows=rows, nuisance=columns)
        for block, seen in zip(blocks, mapped, strict=True)
    )
    made = pairs_without_private(layers, pairs, seed=seed)
    off = tuple(reason and _too_few(space) for reason in made.off)
    damped = made.pairs if level == "subjects" else tuple(_damped(pair, space, design) for pair in made.pairs)
    return CleanedRepeated(
        damped, made.shared, tuple(pairs), space, mapped, layers, made.components, off, made.steady
    )


def _too_few(space: SubjectSpace) -> str:
    """Return why nothing was removed, in what the study counts."""
    what = f"{len(space.blocks)} subjects"
    if space.contrasts is not None:
        what = f"{len(space.contrasts)} changes within {what}"
    left = space.nuisance.n_samples - space.nuisance.rank
    return (
        f"{what} leave {left} dimensions after the nuisance, what all have in common among it: with fewer than "
        f"{FEWEST_DIMENSIONS} private variation cannot be told from noise"
    )


def _damped(pair: BlockPair, space: SubjectSpace, design: SubjectDesign) -> BlockPair:
    """Return a pair whose damping charges features of an unusual course as well."""
    sides = ((pair.x, pair.x_private), (pair.y, pair.y_private))
    first, second = (
        course_damping_of_rows(space, design, np.asarray(side), own or space.nuisance) for side, own in sides
    )
    given = pair.damping or (np.ones(first.size), np.ones(second.size))
    return replace(pair, damping=(given[0] * first, given[1] * second))
