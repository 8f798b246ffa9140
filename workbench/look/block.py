"""The first look at one block: components, what they go with, odd samples, gaps, distributions."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.stats import beta

from workbench.engine.linear import ThinBasis, thin_basis
from workbench.engine.look.association import AssociationMap, associate
from workbench.engine.look.component_number import ComponentNumber, choose_number
from workbench.engine.look.components import ScaledBlock, circle_places, decompose, scaled_block
from workbench.engine.look.sample_distances import SampleDistances, sample_distances
from workbench.engine.nuisance import check_finite
from workbench.errors import NumericsError
from workbench.look.gaps import Distributions, GapMap, distributions, gap_map
from workbench.look.relations import Relations, feature_relations
from workbench.look.view import BlockView, Levels, column_levels, sample_columns

FloatArray = NDArray[np.float64]

COMPONENTS_SHOWN = 10
MOST_COMPONENTS_SHOWN = 20
MOST_SHAPES = 6
ALONE_SHARE = 0.5
ALONE_LEVEL = 0.01
FEWEST_FOR_ALONE = 5
T2: Literal["t2"] = "t2"
SPE: Literal["spe"] = "spe"
ALONE: Literal["alone"] = "alone"


@dataclass(frozen=True)
class SampleFlag:
    """One reason to check a sample.

    Attributes
    ----------
    sample : int
        Position.
    kind : {"t2", "spe", "alone"}
        Far out within the model, far from the model, or most of one component by itself.
    component : int
        The component (from 1) that the sample makes up; 0 for the other kinds.
    value, limit : float
        T2, squared prediction error or share of the component, and its limit.
    """

    sample: int
    kind: Literal["t2", "spe", "alone"]
    component: int
    value: float
    limit: float


def flagged_samples(flags: Sequence[SampleFlag]) -> list[int]:
    """Positions of the samples to check, the one furthest past its limit first."""
    strength: dict[int, float] = {}
    for flag in flags:
        strength[flag.sample] = max(strength.get(flag.sample, 0.0), flag.value / flag.limit)
    return sorted(strength, key=lambda i: -strength[i])


@dataclass(frozen=True, eq=False)
class BlockLook:
    """All that the first look at a block found, as plain data; ``k`` components are shown.

    Attributes
    ----------
    name, layer : str
    samples, features, measured_features : tuple of str
    constant : tuple of str
        Features that do not vary and take no part.
    groups, shapes : Levels or None
        What colours and what shapes the marks of the samples.
    adjust : tuple of str
        Columns that the study adjusts for.
    eigenvalues, shares, cumulative : ndarray of shape (rank,)
        Variance of every component, as a share of the total, and added up.
    scores : ndarray of shape (n_samples, k)
    loadings, correlations : ndarray of shape (n_features, k)
        Unit-length loadings, and correlations with the components (NaN for constant features).
    number : ComponentNumber
    association : AssociationMap
        Of the ``k`` components with every column of the sample sheet.
    distances : SampleDistances
    flags : tuple of SampleFlag
    relations : Relations
    gaps : GapMap or None
    distributions : Distributions
    imputed_share : float
        Share of the prepared values that preparation filled in.
    """

    name: str
    layer: str
    samples: tuple[str, ...]
    features: tuple[str, ...]
    measured_features: tuple[str, ...]
    constant: tuple[str, ...]
    groups: Levels | None
    shapes: Levels | None
    adjust: tuple[str, ...]
    eigenvalues: FloatArray
    shares: FloatArray
    cumulative: FloatArray
    scores: FloatArray
    loadings: FloatArray
    correlations: FloatArray
    number: ComponentNumber
    association: AssociationMap
    distances: SampleDistances
    flags: tuple[SampleFlag, ...]
    relations: Relations
    gaps: GapMap | None
    distributions: Distributions
    imputed_share: float


def look_at_block(view: BlockView, *, seed: int, draws: int | None = None) -> BlockLook:
    """Look at one block on its own.

    Parameters
    ----------
    view : BlockView
    seed : int
        For permutations and folds; equal seeds give equal looks.
    draws : int, optional
        Permuted blocks of the parallel analysis (50, or 20 for large blocks).

    Raises
    ------
    NumericsError
        With one sample, no feature that varies, or gaps in the prepared values; the message names the block.
    """
    try:
        block = scaled_block(check_finite(view.prepared, "its prepared table"))
    except NumericsError as error:
        raise NumericsError(f"block '{view.name}': {error}") from error
    basis = thin_basis(block.values)
    number = choose_number(_varying(block), random_state=seed, basis=basis, draws=draws)
    shown = min(basis.rank, max(COMPONENTS_SHOWN, min(number.number, MOST_COMPONENTS_SHOWN)))
    found = decompose(block, shown, basis)
    places = circle_places(block, found)
    distances = sample_distances(basis, _model_size(number.number, basis.rank))
    shares = found.eigenvalues / found.eigenvalues.sum()
    return BlockLook(
        name=view.name,
        layer=view.layer,
        samples=view.samples,
        features=view.features,
        measured_features=view.names_measured,
        constant=tuple(view.features[j] for j in np.flatnonzero(~block.varies)),
        groups=view.groups,
        shapes=_shapes(view),
        adjust=view.adjust,
        eigenvalues=found.eigenvalues,
        shares=shares,
        cumulative=np.cumsum(shares),
        scores=found.scores,
        loadings=found.loadings.T,
        correlations=places,
        number=number,
        association=associate(found.scores, sample_columns(view)),
        distances=distances,
        flags=_flags(basis, distances, number),
        relations=feature_relations(block.values, places),
        gaps=gap_map(view),
        distributions=distributions(view),
        imputed_share=float(view.imputed.mean()) if view.imputed is not None else 0.0,
    )


def _varying(block: ScaledBlock) -> FloatArray:
    return block.values if block.varies.all() else block.values[:, block.varies]


def _model_size(number: int, rank: int) -> int:
    """Components inside which samples are compared: those with signal, at least 2, one less than all."""
    return max(1, min(max(number, 2), rank - 1))


def _shapes(view: BlockView) -> Levels | None:
    """Classes that shape the marks, if they are few enough to tell apart."""
    if not view.shape_by:
        return None
    found = column_levels(view.shape_by, view.columns[view.shape_by])
    return found if 2 <= len(found.levels) <= MOST_SHAPES else None


def _flags(basis: ThinBasis, distances: SampleDistances, number: ComponentNumber) -> tuple[SampleFlag, ...]:
    """Find samples beyond a 99 % limit, and those that make up most of a component alone."""
    flags = [
        SampleFlag(i, kind, 0, float(values[i]), limit)
        for kind, values, limit in (
            (T2, distances.t2, distances.t2_limits[-1]),
            (SPE, distances.spe, distances.spe_limits[-1]),
        )
        for i in np.flatnonzero(values > limit).tolist()
    ]
    return tuple(sorted(flags + _alone(basis, max(number.number, 2)), key=lambda flag: flag.sample))


def _alone(basis: ThinBasis, leading: int) -> list[SampleFlag]:
    """Find samples whose score makes up more than half of a leading component, more than chance allows.

    Chance: the squared share of one of n normal scores follows a beta law with 1/2 and (n - 2) / 2; its 99 %
    point is taken over all samples and components looked at.
    """
    squares = basis.vectors[:, :leading] ** 2
    n = squares.shape[0]
    if n < FEWEST_FOR_ALONE:
        return []
    limit = max(ALONE_SHARE, float(beta.isf(ALONE_LEVEL / squares.size, 0.5, (n - 2) / 2)))
    return [
        SampleFlag(i, ALONE, k + 1, float(squares[i, k]), limit)
        for i, k in np.argwhere(squares > limit).tolist()
    ]
