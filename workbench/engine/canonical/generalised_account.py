"""How much of each block's variance is shared by all blocks, by some, private, and noise."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.canonical.generalised_components import mean_over
from workbench.engine.linear import thin_basis
from workbench.engine.nuisance import check_finite
from workbench.engine.scree import parallel_analysis
from workbench.engine.signal_components import signal_components

FloatArray = NDArray[np.float64]

PARTS = ("shared_by_all", "shared_by_some", "private", "noise")
TAKES_PART = 2.0
SEED = 0


@dataclass(frozen=True, eq=False)
class VarianceAccount:
    """Shares of one block's variance, nuisance removed; they add up to 1.

    Attributes
    ----------
    shared_by_all, shared_by_some, private, noise : float
        In components that all blocks have; that this one and some others have; in further components of its own;
        the rest.
    private_components : int
        How many further components it has.
    """

    shared_by_all: float
    shared_by_some: float
    private: float
    noise: float
    private_components: int


def takes_part(
    with_others: FloatArray, errors: FloatArray, variates: Sequence[FloatArray]
) -> NDArray[np.bool_]:
    """Which block has which component: its variate goes with the others' mean, out of sample and in the final fit.

    Out of sample by two standard errors; in sample, where any fit does at least as well, by ``2 / sqrt(n)``: two
    components of almost equal strength change places from fold to fold, and a block that has one of them alone
    would seem to have both.

    Parameters
    ----------
    with_others, errors : ndarray of shape (n_components, n_blocks)
        Of :class:`workbench.engine.canonical.generalised_validation.GeneralisedValidation`. A component of a
        single block is of none.
    variates : sequence of ndarray of shape (n_samples, n_components)
        Each block's variates in the final fit; NaN for a sample that it lacks.
    """
    fitted = np.column_stack([_goes_with_others(variates, own) for own in range(len(variates))])
    found = np.asarray((with_others > TAKES_PART * errors) & fitted)
    return np.asarray(found & (found.sum(axis=1, keepdims=True) >= 2))


def _goes_with_others(variates: Sequence[FloatArray], own: int) -> NDArray[np.bool_]:
    """Whether a block's variates go with the mean of the other blocks' in sample, (n_components,)."""
    both = (variates[own], mean_over([one for k, one in enumerate(variates) if k != own]))
    known = np.isfinite(both[0][:, 0]) & np.isfinite(both[1][:, 0])
    u, v = (one[known] - one[known].mean(axis=0) for one in both)
    products = np.sum(u * v, axis=0)
    lengths = np.linalg.norm(u, axis=0) * np.linalg.norm(v, axis=0)
    return np.asarray(products > TAKES_PART / np.sqrt(known.sum()) * lengths)


def variance_accounts(
    blocks: Sequence[FloatArray], variates: Sequence[FloatArray], part: NDArray[np.bool_], rank: int = 1
) -> list[VarianceAccount]:
    """Account for the variance of every block.

    A shared component is measured in a block by the mean variate of the *other* blocks that have it, which knows
    nothing of the block's own noise. What a direction takes by chance (the block's remaining variance over its
    degrees of freedom) is taken off. Private components are those that carry signal once the shared ones are
    removed (:func:`workbench.engine.signal_components.signal_components`; with fewer features than samples no more than
    parallel analysis finds, as unequal noise of few features passes for signal), less the noise in their directions.

    Parameters
    ----------
    blocks : sequence of ndarray of shape (n_samples, p_b)
        Nuisance removed; rows of NaN for a sample that the block lacks.
    variates : sequence of ndarray of shape (n_samples, n_components)
        Each block's variates.
    part : ndarray of bool, shape (n_components, n_blocks)
        Which block has which component.
    rank : int
        Dimensions of the nuisance, the intercept counted.

    Examples
    --------
    >>> rng = np.random.default_rng(0)
    >>> shared = rng.normal(size=(80, 1))
    >>> blocks = [shared @ rng.normal(size=(1, 300)) + rng.normal(size=(80, 300)) for _ in "abc"]
    >>> account = variance_accounts(blocks, [shared] * 3, np.ones((1, 3), dtype=bool))[0]
    >>> round(account.shared_by_all, 1), round(account.private, 1), round(account.noise, 1)
    (0.5, 0.0, 0.5)
    """
    return [variance_account(block, variates, part, own, rank) for own, block in enumerate(blocks)]


def variance_account(
    block: FloatArray, variates: Sequence[FloatArray], part: NDArray[np.bool_], own: int, rank: int = 1
) -> VarianceAccount:
    """Account for the variance of one block, whose variates stand at place ``own``; see :func:`variance_accounts`."""
    held = np.isfinite(block[:, 0])
    x = check_finite(block[held], "the block")
    freedom, total = x.shape[0] - rank, float(np.sum(x**2))
    by_all = np.asarray(part.all(axis=1))
    kinds = (by_all, np.asarray(part[:, own] & ~by_all))
    spanned = np.empty((x.shape[0], 0))
    taken: list[tuple[float, int]] = []
    for kind in kinds:
        columns = _others(variates, part, kind, own)[held]
        columns = columns - spanned @ (spanned.T @ columns)
        lengths = np.linalg.norm(columns, axis=0)
        basis = np.linalg.qr(columns[:, lengths > 0.0])[0]
        taken.append((float(np.sum((basis.T @ x) ** 2)), basis.shape[1]))
        spanned = np.hstack([spanned, basis])
    left = x - spanned @ (spanned.T @ x)
    room = max(freedom - spanned.shape[1], 1)
    chance = float(np.sum(left**2)) / room
    shared = [max(found - count * chance, 0.0) / total for found, count in taken]
    rest = thin_basis(left)
    squares = rest.lengths**2
    number = min(signal_components(rest).number, rest.rank - 1)
    if left.shape[1] < left.shape[0]:
        number = min(number, parallel_analysis(left, squares / (left.shape[0] - 1), random_state=SEED).number)
    noise = float(squares[number:].sum()) / max(rest.rank - number, 1)
    private = max(float(np.sum(squares[:number] - noise)), 0.0) / total
    return VarianceAccount(shared[0], shared[1], private, max(1.0 - sum(shared) - private, 0.0), number)


def _others(
    variates: Sequence[FloatArray], part: NDArray[np.bool_], kind: NDArray[np.bool_], own: int
) -> FloatArray:
    """Mean variate of the other blocks that have each component of a kind; 0 where none of them has the sample."""
    columns = [np.empty((variates[0].shape[0], 0))]
    for k in np.flatnonzero(kind):
        members = [variate[:, [k]] for b, variate in enumerate(variates) if b != own and part[k, b]]
        columns.append(np.nan_to_num(mean_over(members)))
    return np.hstack(columns)
