"""Pair screening with each block's private variation removed: what one layer has alone buries what layers share.

Each block's real components are found from that block alone. A component that goes with a block of another
layer is shared and stays; the others are regressed out of their own block. Removal that never looked at the
other block costs no degrees of freedom: with the samples' rows independent and normal, the other block's
feature has no preferred direction among the samples, so its correlation with any fixed vector follows the t law
of ``n - c - 1``. The test that keeps shared components does look: it keeps a strong private one with a chance of
about 1 in 1,000, which is what the look can add to the false-discovery rate. Weak components stay as they bury
little.

References
----------
Lock et al. 2013, Annals of Applied Statistics 7:523; Feng et al. 2018, Journal of Multivariate Analysis 166:241
(joint and individual variation).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine.far_values import withstand
from workbench.engine.nuisance import CONSTANT_TOLERANCE, Nuisance
from workbench.engine.pairs.screen import BlockPair, BlockScreen, Correlation, Progress
from workbench.engine.private.module_union import screen_supported
from workbench.engine.private.private_components import (
    FEWEST_DIMENSIONS,
    BlockComponents,
    block_components,
    tells_components,
)
from workbench.engine.private.private_retention import retention_levels, retention_p
from workbench.engine.private.private_untangling import admixture, entangled
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

Stays = Literal["shared", "weak", "entangled", ""]

LEADING = 10
#: A component is removed when it takes at least so many times the share of a direction of pure noise.
WORTH = 2.0


@dataclass(frozen=True, eq=False)
class LayerBlock:
    """A prepared block as the screen takes it.

    Attributes
    ----------
    name, layer : str
    values : ndarray of shape (n_samples, n_features)
    rows : ndarray of int, shape (n_samples,)
        Which of the study's samples the rows are; each at most once.
    nuisance : ndarray of shape (n_samples, n_columns)
        Columns to be removed, without the intercept.
    """

    name: str
    layer: str
    values: FloatArray
    rows: IndexArray
    nuisance: FloatArray


@dataclass(frozen=True, eq=False)
class RealComponent:
    """One real component of a block, and whether another layer shares it.

    Attributes
    ----------
    number : int
        From 1, strongest first.
    share : float
        Share of the block's variance after the nuisance.
    shared_with : str
        The block that it goes with best when it is shared (and stays); empty when it is private.
    p : float
        Smallest p of the tests against the blocks of other layers, times the number of tests.
    stays : {"shared", "weak", "entangled", ""}
        Why it stays: it is shared; or it takes less than ``WORTH`` times the share of a direction of pure noise;
        or it cannot be told from a shared one that reaches most features. Empty when it was removed.
    scores : ndarray of shape (n_samples,)
        Unit length; rows are those of the block. Of a removed one what was regressed out, freed of the
        admixture of those that stay.
    leading : ndarray of int
        Positions of the features that go with it most, strongest first.
    loadings : ndarray of float
        Their correlations with the scores.
    """

    number: int
    share: float
    shared_with: str
    p: float
    stays: Stays
    scores: FloatArray
    leading: IndexArray
    loadings: FloatArray

    @property
    def removed(self) -> bool:
        """Whether it is private and was regressed out."""
        return not self.stays


@dataclass(frozen=True, eq=False)
class PrivateScreen:
    """A screen with private variation removed.

    Attributes
    ----------
    screen : BlockScreen
    support : ndarray of str, shape (n_edges,)
        What carries each edge: ``pair``, its own test; ``module``, its module alone; or ``both``.
    components : tuple of tuple of RealComponent
        For each block its real components, shared and private.
    off : tuple of str
        For each pair of blocks the reason why nothing was removed; empty where removal was on.
    cleaned : tuple of (ndarray, ndarray)
        For each pair of blocks both blocks' values on the samples that they share, as they were tested:
        heavy tails withstood (Spearman: ranks taken), nuisance and private variation removed.
    couples, mixed : tuple of int
        For each pair of blocks the couples of shared components that modules were sought by, and those of them
        that were left out as mixtures of shared factors; empty where none were sought.
    steady : tuple of ndarray of shape (n_samples,)
        For each block what the residuals of each of its samples were multiplied by: 1, or less for an odd one.
    """

    screen: BlockScreen
    support: NDArray[np.str_]
    components: tuple[tuple[RealComponent, ...], ...]
    off: tuple[str, ...]
    cleaned: tuple[tuple[FloatArray, FloatArray], ...] = field(repr=False)
    couples: tuple[int, ...] = ()
    mixed: tuple[int, ...] = ()
    steady: tuple[FloatArray, ...] = ()

    @property
    def removed(self) -> tuple[tuple[RealComponent, ...], ...]:
        """For each block the components that were removed."""
        return tuple(tuple(one for one in block if one.removed) for block in self.components)


@dataclass(frozen=True, eq=False)
class CleanedPairs:
    """Pairs of blocks as they are tested once private variation is removed; fields as in ``PrivateScreen``.

    ``shared`` holds for each pair the scores of both blocks' shared components on its samples, of unit length with
    the nuisance removed; none where nothing is removed.
    """

    pairs: tuple[BlockPair, ...]
    shared: tuple[tuple[FloatArray, FloatArray], ...]
    components: tuple[tuple[RealComponent, ...], ...]
    off: tuple[str, ...]
    steady: tuple[FloatArray, ...]


def pairs_without_private(
    blocks: Sequence[LayerBlock],
    pairs: Sequence[tuple[int, int]],
    *,
    correlation: Correlation = "pearson",
    seed: int = 0,
) -> CleanedPairs:
    """Pairs of blocks ready for a screen, each block's private variation removed from it.

    Parameters
    ----------
    blocks, pairs, correlation, seed
        As for :func:`screen_without_private`.

    Raises
    ------
    NumericsError
        When shapes, values or places do not allow it.
    """
    ranks = correlation == "spearman"
    found = tuple(_own_components(block, ranks, seed) for block in blocks)
    views = tuple(_shared_rows(blocks[a], blocks[b]) for a, b in pairs)
    judged = _judge(blocks, found, views, pairs)
    off = tuple(_reason(view, blocks[a], blocks[b]) for view, (a, b) in zip(views, pairs, strict=True))
    tested = tuple(
        _pair(blocks, judged, view, pair, bool(reason), ranks)
        for view, pair, reason in zip(views, pairs, off, strict=True)
    )
    shared = tuple(
        (_shared(judged[a], view, view.x_rows, reason), _shared(judged[b], view, view.y_rows, reason))
        for view, (a, b), reason in zip(views, pairs, off, strict=True)
    )
    told, steady = tuple(one.components for one in judged), tuple(one.steady for one in judged)
    return CleanedPairs(tested, shared, told, off, steady)


def screen_without_private(
    blocks: Sequence[LayerBlock],
    pairs: Sequence[tuple[int, int]],
    *,
    fdr: float = 0.05,
    correlation: Correlation = "pearson",
    minimum_r: float = 0.0,
    maximum_edges: int | None = None,
    seed: int = 0,
    progress: Progress | None = None,
) -> PrivateScreen:
    """Edges between blocks of different layers, each block's private variation removed from it.

    Parameters
    ----------
    blocks : sequence of LayerBlock
    pairs : sequence of (int, int)
        Positions of the blocks to be screened against each other, of two different layers.
    fdr, correlation, minimum_r, maximum_edges, progress
        As for :func:`~workbench.engine.pairs.screen.screen_blocks`.
    seed : int
        For the number of components of narrow blocks.

    Raises
    ------
    NumericsError
        When shapes, values or places do not allow the screen.
    """
    return screen_cleaned(
        pairs_without_private(blocks, pairs, correlation=correlation, seed=seed),
        fdr=fdr,
        correlation=correlation,
        minimum_r=minimum_r,
        maximum_edges=maximum_edges,
        progress=progress,
    )


def screen_cleaned(
    made: CleanedPairs,
    *,
    fdr: float = 0.05,
    correlation: Correlation = "pearson",
    minimum_r: float = 0.0,
    maximum_edges: int | None = None,
    progress: Progress | None = None,
) -> PrivateScreen:
    """Edges between pairs of blocks freed of private variation, by their own tests and by their modules.

    Parameters
    ----------
    made : CleanedPairs
    fdr, correlation, minimum_r, maximum_edges, progress
        As for :func:`screen_without_private`, the correlation that ``made`` was made for.

    Raises
    ------
    NumericsError
        When shapes or values do not allow the screen.
    """
    found = screen_supported(
        made.pairs,
        made.shared,
        fdr=fdr,
        correlation=correlation,
        minimum_r=minimum_r,
        maximum_edges=maximum_edges,
        progress=progress,
    )
    cleaned = tuple(_as_tested(pair, correlation == "spearman") for pair in made.pairs)
    return PrivateScreen(
        found.screen,
        found.support,
        made.components,
        made.off,
        cleaned,
        found.couples,
        found.mixed,
        made.steady,
    )


def _as_tested(pair: BlockPair, ranks: bool) -> tuple[FloatArray, FloatArray]:
    """Return both sides of a pair as their correlations are taken."""
    sides = []
    for side, own in ((pair.x, pair.x_private), (pair.y, pair.y_private)):
        values = np.asarray(side, dtype=np.float64)
        nuisance = own or Nuisance.of(None, len(values))
        sides.append(nuisance.residuals(np.asarray(rankdata(values, axis=0)) if ranks else values))
    return sides[0], sides[1]


@dataclass(frozen=True, eq=False)
class _View:
    """Rows that two blocks share, in each block, and the union of their nuisance on them."""

    x_rows: IndexArray
    y_rows: IndexArray
    nuisance: Nuisance
    columns: FloatArray


def _own_components(block: LayerBlock, ranks: bool, seed: int) -> BlockComponents:
    nuisance = Nuisance.of(block.nuisance, block.values.shape[0])
    return block_components(block.values, nuisance, ranks=ranks, seed=seed)


def _shared_rows(x: LayerBlock, y: LayerBlock) -> _View:
    common, x_rows, y_rows = np.intersect1d(x.rows, y.rows, assume_unique=True, return_indices=True)
    if x.layer == y.layer:
        raise NumericsError(f"{x.name!r} and {y.name!r} are of one layer, {x.layer!r}; give two layers")
    if common.size < 3:
        raise NumericsError(f"{x.name!r} and {y.name!r} share {common.size} samples; at least 3 are needed")
    columns = np.hstack([x.nuisance[x_rows], y.nuisance[y_rows]])
    return _View(x_rows, y_rows, Nuisance.of(columns, common.size), columns)


def _reason(view: _View, x: LayerBlock, y: LayerBlock) -> str:
    if tells_components(view.nuisance):
        return ""
    return (
        f"{x.name} and {y.name} share {view.nuisance.n_samples} samples, and intercept and nuisance take "
        f"{view.nuisance.rank} dimensions of them: with fewer than {FEWEST_DIMENSIONS} left, private "
        "variation cannot be told from noise"
    )


def _judge(
    blocks: Sequence[LayerBlock],
    found: Sequence[BlockComponents],
    views: Sequence[_View],
    pairs: Sequence[tuple[int, int]],
) -> tuple[_Judged, ...]:
    """Tell each block's shared components from its private ones."""
    tests: list[dict[int, FloatArray]] = [{} for _ in blocks]
    for view, (a, b) in zip(views, pairs, strict=True):
        for own, other, rows, others in ((a, b, view.x_rows, view.y_rows), (b, a, view.y_rows, view.x_rows)):
            tests[own][other] = retention_p(
                found[own].scores[rows], found[other].z[others], found[other].scores[others], view.nuisance
            )
    return tuple(
        _freed(own, _described(blocks, own, by), block.values.shape[1])
        for block, own, by in zip(blocks, found, tests, strict=True)
    )


def _described(
    blocks: Sequence[LayerBlock], own: BlockComponents, tests: dict[int, FloatArray]
) -> tuple[RealComponent, ...]:
    others = list(tests)
    loadings = own.loadings
    levels = retention_levels(own.shares, own.dimensions)
    described = []
    for k in range(own.shares.size):
        p = np.array([tests[other][k] for other in others])
        best = int(p.argmin()) if p.size else -1
        adjusted = min(1.0, float(p[best]) * p.size) if p.size else 1.0
        leading = np.argsort(-np.abs(loadings[:, k]), kind="stable")[:LEADING]
        described.append(
            RealComponent(
                k + 1,
                float(own.shares[k]),
                blocks[others[best]].name if adjusted <= levels[k] else "",
                adjusted,
                _stays(adjusted <= levels[k], own.shares[k] * own.dimensions < WORTH),
                own.scores[:, k],
                own.kept[leading],
                loadings[leading, k],
            )
        )
    return tuple(described)


def _stays(shared: bool, weak: bool) -> Stays:
    return "shared" if shared else "weak" if weak else ""


@dataclass(frozen=True, eq=False)
class _Judged:
    """A block's components, the variance that removal leaves each feature along a shared one, and odd samples."""

    components: tuple[RealComponent, ...]
    trace: FloatArray
    steady: FloatArray


def _freed(own: BlockComponents, told: tuple[RealComponent, ...], n_features: int) -> _Judged:
    """Keep what cannot be told from a shared component; free what is removed of what stays."""
    trace = np.zeros(n_features)
    removed = np.array([one.removed for one in told], dtype=bool)
    shared = np.array([bool(one.shared_with) for one in told], dtype=bool)
    if removed.any() and shared.any():
        net = own.shares - 1.0 / own.dimensions
        mixed = admixture(own.z, own.scores[:, removed], own.scores[:, shared], own.dimensions)
        places = np.flatnonzero(removed)
        keep = places[entangled(mixed, net[removed], net[shared])]
        told = tuple(replace(one, stays="entangled") if k in keep else one for k, one in enumerate(told))
        removed[keep] = False
        trace[own.kept] = _trace(own, removed, mixed.variance[:, ~np.isin(places, keep)])
    if not removed.any() or removed.all():
        return _Judged(told, trace, own.steady)
    mixed = admixture(own.z, own.scores[:, removed], own.scores[:, ~removed], own.dimensions)
    factors = own.scores[:, removed] + own.scores[:, ~removed] @ mixed.coefficients
    factors /= np.linalg.norm(factors, axis=0)
    place = np.cumsum(removed) - 1
    told = tuple(
        replace(one, scores=factors[:, place[k]]) if removed[k] else one for k, one in enumerate(told)
    )
    return _Judged(told, trace, own.steady)


def _trace(own: BlockComponents, removed: NDArray[np.bool_], variance: FloatArray) -> FloatArray:
    """Return the variance that the error of the admixture leaves in each feature along a shared component.

    A feature with loading b on what is removed keeps b times the error, in units of its residual length.
    """
    squares = own.loadings**2
    left = np.maximum(1.0 - squares[:, removed].sum(axis=1), 1e-2)
    trace: FloatArray = np.max(squares[:, removed] @ variance.T, axis=1, initial=0.0) / left
    return trace


def _pair(
    blocks: Sequence[LayerBlock],
    judged: Sequence[_Judged],
    view: _View,
    pair: tuple[int, int],
    off: bool,
    ranks: bool,
) -> BlockPair:
    """Return the two blocks on the samples that they share, with what is removed from each."""
    sides = []
    for place, rows in zip(pair, (view.x_rows, view.y_rows), strict=True):
        taken = [one.scores[rows] for one in judged[place].components if one.removed and not off]
        own = Nuisance.of(np.column_stack([view.columns, *taken]), rows.size)
        values = blocks[place].values[rows]
        freedom = rows.size - view.nuisance.rank
        damping = 1.0 / np.sqrt(1.0 + freedom * judged[place].trace * (not off))
        if not ranks:
            values = cleaned_features(values, view.nuisance, own, judged[place].steady[rows])
        sides.append((values, own, damping))
    (x, x_own, x_damping), (y, y_own, y_damping) = sides
    name = f"{blocks[pair[0]].name} x {blocks[pair[1]].name}"
    return BlockPair(name, x, y, view.nuisance, x_own, y_own, (x_damping, y_damping))


def _shared(block: _Judged, view: _View, rows: IndexArray, off: str) -> FloatArray:
    """Return the scores of a block's shared components on some rows, nuisance removed, of unit length."""
    scores = [one.scores[rows] for one in block.components if one.stays == "shared" and not off]
    rest = view.nuisance.residuals(np.column_stack([np.empty((rows.size, 0)), *scores]))
    unit: FloatArray = rest / np.linalg.norm(rest, axis=0)
    return unit


def steadied(values: FloatArray, nuisance: Nuisance, own: Nuisance, steady: FloatArray) -> FloatArray:
    """Residuals of features, odd samples shrunk; arguments as for :func:`cleaned_features`."""
    odd = (steady < 1.0).any()
    return own.residuals(steady[:, None] * nuisance.residuals(values) if odd else values)


def cleaned_features(values: FloatArray, nuisance: Nuisance, own: Nuisance, steady: FloatArray) -> FloatArray:
    """Return what is left of the features of a block, as a screen takes it for Pearson's correlation.

    Odd samples are shrunk once the nuisance is out; what is removed with it goes then, and heavy tails are
    withstood. Features that have no variance left are exactly zero.

    Parameters
    ----------
    values : ndarray of shape (n_samples, n_features)
    nuisance : Nuisance
        Of both blocks.
    own : Nuisance
        The same with the block's private variation.
    steady : ndarray of shape (n_samples,)
        What each sample's residuals are multiplied by.
    """
    rest = steadied(values, nuisance, own, steady)
    constant = np.linalg.norm(rest, axis=0) <= CONSTANT_TOLERANCE * np.linalg.norm(values, axis=0)
    rest[:, constant] = 0.0
    return withstand(rest, own.n_samples - own.rank)
