"""How far two blocks agree about the same samples: RV coefficients and Procrustes, tested by permutation."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from itertools import permutations as arrangements_of
from itertools import product

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from workbench.engine.folds import Seed
from workbench.engine.linear import RANK_TOLERANCE
from workbench.engine.nuisance import Nuisance
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
Progress = Callable[[int, int], None]

FEWEST_SAMPLES = 4
FEWEST_ARRANGEMENTS = 120
TIE = 1e-9


@dataclass(frozen=True)
class Agreement:
    """Agreement of two blocks on the samples they share.

    Attributes
    ----------
    n : int
        Samples.
    rv, rv_expected, rv_adjusted : float
        RV coefficient (0 to 1), its mean over all allowed permutations, and ``(RV - mean) / (1 - mean)``,
        which is 0 on average without agreement and 1 for blocks equal up to rotation and size.
    procrustes, procrustes_expected : float
        Correlation after the best rotation of one block's leading scores onto the other's, and its mean over
        the permutations that were drawn.
    rv_p, procrustes_p : float
        Permutation p; NaN when withheld.
    dimensions : pair of int
        Components of each block in the Procrustes figures.
    permutations : int
        Permutations looked at, the observed arrangement not counted.
    smallest_p : float
        Smallest p that could have come out; NaN when withheld.
    withheld : str
        Why there is no p, or "".
    """

    n: int
    rv: float
    rv_expected: float
    rv_adjusted: float
    rv_p: float
    procrustes: float
    procrustes_expected: float
    procrustes_p: float
    dimensions: tuple[int, int]
    permutations: int
    smallest_p: float
    withheld: str


def block_agreement(
    x: FloatArray,
    y: FloatArray,
    *,
    dimensions: tuple[int, int] = (2, 2),
    nuisance: Nuisance | None = None,
    strata: IndexArray | None = None,
    permutations: int = 999,
    random_state: Seed,
    progress: Progress | None = None,
) -> Agreement:
    """Agreement of the sample configurations of two blocks, ``tr(AB) / sqrt(tr(AA) tr(BB))`` and Procrustes.

    ``A = XX'`` and ``B = YY'``. Where features outnumber samples the RV coefficient is near 1 for noise:
    read the adjusted one. Agreement is of whole blocks: a few features that go together do not show in it.

    Parameters
    ----------
    x, y : ndarray of shape (n_samples, p) and (n_samples, q)
        Scaled blocks, the same samples in the same order.
    dimensions : pair of int
        Leading components of each block for Procrustes (fewer where the block has fewer).
    nuisance : Nuisance, optional
        Removed from both blocks; permutations then act in the residuals' basis of n - c dimensions.
    strata : ndarray of int, shape (n_samples,), optional
        Samples are permuted within these alone, which leaves to chance only what happens inside them. Not
        together with a nuisance.
    permutations : int
        All arrangements are taken when there are no more than that.
    random_state : int, SeedSequence, Generator or None

    Raises
    ------
    NumericsError
        For blocks of different samples, fewer than 4 of them, or no variation.

    References
    ----------
    Robert & Escoufier 1976, Applied Statistics 25:257. Kazi-Aoual et al. 1995, Computational Statistics &
    Data Analysis 20:643 (moments of RV under permutation). El Ghaziri & Qannari 2015, Food Quality and
    Preference 40:116 (adjustment). Gower 1975, Psychometrika 40:33. Peres-Neto & Jackson 2001, Oecologia
    129:169 (permutation test). Huh & Jhun 2001, Communications in Statistics 30:2023 (residual basis).

    Examples
    --------
    >>> x = np.random.default_rng(0).normal(size=(12, 50))
    >>> found = block_agreement(x, 3.0 * x[:, ::-1], random_state=1)
    >>> round(found.rv_adjusted, 9), round(found.procrustes, 9), found.rv_p
    (1.0, 1.0, 0.001)
    """
    pairing = _pair(x, y, dimensions, nuisance, strata)
    observed = pairing.statistics(np.arange(pairing.first.shape[0]))
    expected = pairing.expected_rv()
    withheld = _why_withheld(pairing.groups)
    drawn = np.empty((0, 2))
    if not withheld:
        drawn = _permuted(pairing, permutations, np.random.default_rng(random_state), progress)
    p = _p_values(drawn, observed)
    return Agreement(
        n=x.shape[0],
        rv=float(observed[0]),
        rv_expected=expected,
        rv_adjusted=(float(observed[0]) - expected) / (1.0 - expected) if expected < 1.0 else float("nan"),
        rv_p=float(p[0]),
        procrustes=float(observed[1]),
        procrustes_expected=float(drawn[:, 1].mean()) if drawn.size else float("nan"),
        procrustes_p=float(p[1]),
        dimensions=(pairing.left.shape[1], pairing.right.shape[1]),
        permutations=len(drawn),
        smallest_p=1.0 / (1 + len(drawn)) if drawn.size else float("nan"),
        withheld=withheld,
    )


@dataclass(frozen=True, eq=False)
class _Pairing:
    """Two blocks reduced to sample space: kernels of length 1, leading scores, rows that may be exchanged."""

    first: FloatArray
    second: FloatArray
    left: FloatArray
    right: FloatArray
    groups: tuple[IndexArray, ...]

    def statistics(self, order: IndexArray) -> FloatArray:
        """RV coefficient and Procrustes correlation with the second block's rows in another order."""
        rv = np.sum(self.first * self.second[np.ix_(order, order)])
        rotated = np.linalg.svd(self.left.T @ self.right[order], compute_uv=False).sum()
        return np.array([rv, rotated])

    def expected_rv(self) -> float:
        """Mean RV coefficient over all orders that leave the groups as they are.

        A cell of the second kernel takes, on average, the mean of the cells that may come to its place: those
        of the same two groups, on or off the diagonal alike.
        """
        mean = 0.0
        for i, rows in enumerate(self.groups):
            for j, columns in enumerate(self.groups):
                first, second = self.first[np.ix_(rows, columns)], self.second[np.ix_(rows, columns)]
                if i != j:
                    mean += first.sum() * second.mean()
                    continue
                on = np.trace(first) * np.trace(second) / rows.size
                off = (first.sum() - np.trace(first)) * (second.sum() - np.trace(second))
                mean += on + (off / (rows.size * (rows.size - 1)) if rows.size > 1 else 0.0)
        return float(mean)


def _pair(
    x: FloatArray,
    y: FloatArray,
    dimensions: tuple[int, int],
    nuisance: Nuisance | None,
    strata: IndexArray | None,
) -> _Pairing:
    """Check both blocks and reduce them to sample space."""
    n = x.shape[0]
    if y.shape[0] != n or n < FEWEST_SAMPLES:
        raise NumericsError(
            f"the blocks have {n} and {y.shape[0]} samples; agreement needs the same ones in both, at least "
            f"{FEWEST_SAMPLES}"
        )
    nuisance = nuisance or Nuisance.of(None, n)
    if strata is not None and nuisance.rank > 1:
        raise NumericsError(
            "both strata and a nuisance were given; permute within strata, or remove the nuisance, not both"
        )
    one, other = nuisance.residuals(x), nuisance.residuals(y)
    if nuisance.rank > 1:
        left_over = scipy.linalg.qr(nuisance.basis)[0][:, nuisance.rank :]
        one, other = left_over.T @ one, left_over.T @ other
    codes = np.zeros(one.shape[0], dtype=np.intp) if strata is None else strata
    groups = tuple(np.flatnonzero(codes == code) for code in np.unique(codes))
    first, second = _unit_kernel(one, "first"), _unit_kernel(other, "second")
    return _Pairing(first, second, _leading(first, dimensions[0]), _leading(second, dimensions[1]), groups)


def _unit_kernel(x: FloatArray, which: str) -> FloatArray:
    """Return ``XX'`` at length 1."""
    kernel = x @ x.T
    length = float(np.linalg.norm(kernel))
    if length == 0.0:
        raise NumericsError(
            f"the {which} block does not vary over the {x.shape[0]} samples, so that it agrees with nothing; "
            "leave it out"
        )
    unit: FloatArray = kernel / length
    return unit


def _leading(kernel: FloatArray, dimensions: int) -> FloatArray:
    """Return the leading scores, at total length 1."""
    values, vectors = np.linalg.eigh(kernel)
    kept = [k for k in range(values.size)[::-1] if values[k] > RANK_TOLERANCE * values[-1]][:dimensions]
    scores = vectors[:, kept] * np.sqrt(values[kept])
    unit: FloatArray = scores / np.linalg.norm(scores)
    return unit


def _why_withheld(groups: tuple[IndexArray, ...]) -> str:
    """Say why the arrangements are too few for a p, or return nothing."""
    count = math.prod(math.factorial(rows.size) for rows in groups)
    if count >= FEWEST_ARRANGEMENTS:
        return ""
    allowed = "1 arrangement of the samples is" if count == 1 else f"{count} arrangements of the samples are"
    return f"only {allowed} allowed; a p needs at least {FEWEST_ARRANGEMENTS}"


def _permuted(
    pairing: _Pairing, permutations: int, rng: np.random.Generator, progress: Progress | None
) -> FloatArray:
    """Statistics under other orders: all of them where there are no more than ``permutations``."""
    others = math.prod(math.factorial(rows.size) for rows in pairing.groups) - 1
    count = min(others, permutations)
    orders = _every_order(pairing.groups) if others <= permutations else _random_orders(pairing.groups, rng)
    drawn = np.empty((count, 2))
    for done, order in zip(range(count), orders, strict=False):
        drawn[done] = pairing.statistics(order)
        if progress:
            progress(done + 1, count)
    return drawn


def _every_order(groups: tuple[IndexArray, ...]) -> Iterator[IndexArray]:
    """Every order within the groups but the first, which changes nothing."""
    places = np.concatenate(groups)
    choices = product(*(arrangements_of(rows.tolist()) for rows in groups))
    next(choices)
    for chosen in choices:
        order = np.empty(places.size, dtype=np.intp)
        order[places] = np.concatenate([np.array(rows, dtype=np.intp) for rows in chosen])
        yield order


def _random_orders(groups: tuple[IndexArray, ...], rng: np.random.Generator) -> Iterator[IndexArray]:
    """Random orders within the groups, without end."""
    order = np.empty(sum(rows.size for rows in groups), dtype=np.intp)
    while True:
        for rows in groups:
            order[rows] = rng.permutation(rows)
        yield order


def _p_values(drawn: FloatArray, observed: FloatArray) -> FloatArray:
    """``(1 + #{as large}) / (1 + permutations)``, ties counted; NaN without permutations."""
    if not drawn.size:
        return np.full(observed.shape, np.nan)
    reached = np.count_nonzero(drawn >= observed * (1.0 - TIE), axis=0)
    p: FloatArray = (1 + reached) / (1 + len(drawn))
    return p
