"""The look between blocks: how far every two of them agree about the samples they share."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.linear import thin_basis
from workbench.engine.look.agreement import Agreement, block_agreement
from workbench.engine.look.components import scaled_block
from workbench.engine.nuisance import Nuisance
from workbench.engine.signal_components import signal_components
from workbench.errors import NumericsError
from workbench.look.view import BlockView
from workbench.look.words import short, small

FloatArray = NDArray[np.float64]
Progress = Callable[[int, int], None]

PERMUTATIONS = 999
LEVEL = 0.05


@dataclass(frozen=True, eq=False)
class Restriction:
    """What the design asks of the permutations: a nuisance that is removed, or strata that samples stay in.

    Attributes
    ----------
    samples : tuple of str
        All samples of the study.
    columns : ndarray of shape (n_samples, n_columns) or None
        Nuisance columns, classes as indicators, without the intercept.
    strata : ndarray of int, shape (n_samples,), or None
        Samples are exchanged only with those of the same number.
    words : str
        What was done, for the reader: ``run_day removed from both``, ``within batches``.
    """

    samples: tuple[str, ...]
    columns: FloatArray | None = None
    strata: NDArray[np.intp] | None = None
    words: str = ""


@dataclass(frozen=True, eq=False)
class PairLook:
    """Agreement of two blocks, or the reason why there is none."""

    one: str
    other: str
    n: int
    found: Agreement | None
    reason: str


@dataclass(frozen=True, eq=False)
class BetweenLook:
    """Agreement of every two blocks.

    Attributes
    ----------
    blocks : tuple of str
    pairs : tuple of PairLook
    restriction : str
        What the design asked of the permutations, in words; "" for nothing.
    """

    blocks: tuple[str, ...]
    pairs: tuple[PairLook, ...]
    restriction: str


def look_between(
    views: Sequence[BlockView],
    *,
    seed: int,
    restriction: Restriction | None = None,
    permutations: int = PERMUTATIONS,
    progress: Progress | None = None,
) -> BetweenLook:
    """Agreement of every two blocks on the samples that both have.

    Each pair's permutations have a seed of their own, so that a further block changes no figure of the others.

    Parameters
    ----------
    views : sequence of BlockView
    seed : int
    restriction : Restriction, optional
    permutations : int
    progress : callable, optional
        Called with pairs done and pairs in all.
    """
    pairs = [(a, b) for i, a in enumerate(views) for b in views[i + 1 :]]
    looks = []
    for done, (a, b) in enumerate(pairs, start=1):
        looks.append(_look_at_pair(a, b, restriction, permutations, _pair_seed(seed, a, b)))
        if progress:
            progress(done, len(pairs))
    words = restriction.words if restriction is not None else ""
    return BetweenLook(tuple(view.name for view in views), tuple(looks), words)


def _pair_seed(seed: int, a: BlockView, b: BlockView) -> np.random.SeedSequence:
    key = tuple(f"{a.name}\n{b.name}".encode())
    return np.random.SeedSequence(seed, spawn_key=key)


def _look_at_pair(
    a: BlockView,
    b: BlockView,
    restriction: Restriction | None,
    permutations: int,
    seed: np.random.SeedSequence,
) -> PairLook:
    """Agreement of two blocks; what cannot be computed is said, not raised."""
    theirs = set(b.samples)
    if restriction is not None:
        theirs &= set(restriction.samples)
    shared = [sample for sample in a.samples if sample in theirs]
    if not shared:
        return PairLook(a.name, b.name, 0, None, "no sample in common")
    try:
        x, y = (_scaled(view, shared) for view in (a, b))
        nuisance, strata = _restricted(restriction, shared)
        found = block_agreement(
            x,
            y,
            dimensions=(_dimensions(x), _dimensions(y)),
            nuisance=nuisance,
            strata=strata,
            permutations=permutations,
            random_state=seed,
        )
    except NumericsError as error:
        return PairLook(a.name, b.name, len(shared), None, str(error))
    return PairLook(a.name, b.name, len(shared), found, found.withheld)


def _scaled(view: BlockView, shared: Sequence[str]) -> FloatArray:
    """Scaled values of some samples, without features that do not vary among them."""
    place = {sample: i for i, sample in enumerate(view.samples)}
    block = scaled_block(view.prepared[[place[sample] for sample in shared]])
    return block.values[:, block.varies]


def _dimensions(z: FloatArray) -> int:
    """Components that stand for a block in Procrustes: those with signal, at least 2."""
    return max(2, signal_components(thin_basis(z)).number)


def _restricted(
    restriction: Restriction | None, shared: Sequence[str]
) -> tuple[Nuisance | None, NDArray[np.intp] | None]:
    if restriction is None:
        return None, None
    place = {sample: i for i, sample in enumerate(restriction.samples)}
    rows = [place[sample] for sample in shared]
    columns, strata = restriction.columns, restriction.strata
    nuisance = None if columns is None else Nuisance.of(columns[rows], len(rows))
    return nuisance, None if strata is None else strata[rows]


def between_reading(look: BetweenLook) -> tuple[str, ...]:
    """Say in a line for each pair of blocks how far they agree."""
    lines = [_pair_line(pair) for pair in look.pairs]
    if look.restriction and lines:
        lines.append(f"Permutations: {look.restriction}.")
    return tuple(lines)


def _pair_line(pair: PairLook) -> str:
    who = f"{short(pair.one)} and {short(pair.other)}, {pair.n} samples in common"
    if pair.found is None:
        return f"{who}: not compared: {pair.reason}."
    found = pair.found
    if np.isnan(found.rv_adjusted):
        return f"{who}: not compared: with the design taken out no arrangement of the samples but their own is left."
    figures = f"adjusted RV {found.rv_adjusted:.2f}, Procrustes correlation {found.procrustes:.2f}"
    if found.withheld:
        return f"{who}: {figures}; no p: {found.withheld}."
    verdict = _verdict(found)
    return f"{who}: {verdict} ({figures}; p {small(found.rv_p)} and {small(found.procrustes_p)})."


def _verdict(found: Agreement) -> str:
    whole, leading = found.rv_p <= LEVEL, found.procrustes_p <= LEVEL
    if whole and leading:
        return "the samples lie alike in both"
    if whole:
        return "the whole blocks agree, their leading components not beyond chance"
    if leading:
        return "their leading components agree, the whole blocks not beyond chance"
    return "no agreement of whole blocks beyond chance, which leaves room for few features that go together"
