"""Blocks of repeated samples as blocks of independent rows, so that private variation can be found on them."""

from __future__ import annotations

from collections.abc import Sequence
from functools import reduce

import numpy as np
from numpy.typing import NDArray

from workbench.engine.private_variation import LayerBlock
from workbench.engine.repeated import Level, mapped_block, subject_space
from workbench.engine.screen import Correlation
from workbench.engine.subjects import SubjectDesign
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


def independent_layers(
    blocks: Sequence[LayerBlock], design: SubjectDesign, level: Level, correlation: Correlation = "pearson"
) -> tuple[LayerBlock, ...]:
    """Blocks on the independent rows of :func:`~workbench.engine.repeated.subject_space`.

    All blocks are taken on the samples that every one of them has, with the union of their nuisance, and
    share one map: they can be screened with private variation removed like blocks of independent samples.
    The rows of the result are numbers of contrasts (or subjects), not of samples.

    Parameters
    ----------
    blocks : sequence of LayerBlock
        ``rows`` are positions among the samples of ``design``.
    design : SubjectDesign
        Of all samples of the study.
    level, correlation
        As for :func:`~workbench.engine.repeated.screen_repeated`; ranks are taken here.

    Raises
    ------
    NumericsError
        When the blocks share no samples, or no subject with two (level "visits").
    """
    common = reduce(np.intersect1d, [block.rows for block in blocks])
    if common.size < 2:
        raise NumericsError(f"the blocks share {common.size} samples; at least 2 are needed")
    places = [_places(block, common) for block in blocks]
    values = [block.values[place] for block, place in zip(blocks, places, strict=True)]
    nuisance = np.hstack([block.nuisance[place] for block, place in zip(blocks, places, strict=True)])
    own = design.take(common)
    space = subject_space(values, own, nuisance, level, correlation)
    rows = np.arange(space.matrix.shape[0])
    columns = space.nuisance.basis[:, 1:]
    return tuple(
        LayerBlock(
            block.name, block.layer, mapped_block(part, own, space, level, correlation)[:, :], rows, columns
        )
        for block, part in zip(blocks, values, strict=True)
    )


def _places(block: LayerBlock, common: NDArray[np.intp]) -> NDArray[np.intp]:
    """Rows of a block that hold the common samples, in their order."""
    order = np.argsort(block.rows)
    places: NDArray[np.intp] = order[np.searchsorted(block.rows[order], common)]
    return places
