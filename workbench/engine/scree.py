"""Older suggestions for the number of components: the elbow, parallel analysis, cross-validation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.folds import Seed, balanced_folds
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

PARALLEL_LEVEL = 0.95
ONE_SIDED_95 = 1.645
CELLS_FOR_MANY_DRAWS = 2_000_000
MANY_DRAWS, FEW_DRAWS = 50, 20
MOST_CROSS_VALIDATED = 30
FEWEST_SAMPLES, FEWEST_FEATURES = 6, 4


@dataclass(frozen=True)
class Elbow:
    """Where the curve of explained variance turns flat: ``number`` components before it, and the reason."""

    number: int
    reason: str


def elbow(eigenvalues: FloatArray) -> Elbow:
    """Elbow of the explained variance: the point furthest below the chord from the first to the last.

    Both axes run from 0 to 1. A suggestion for the eye: pure noise has an elbow too.

    Parameters
    ----------
    eigenvalues : ndarray of shape (n_components,)
        Largest first.

    Examples
    --------
    >>> elbow(np.array([40.0, 30.0, 6.0, 5.0, 5.0, 4.0, 4.0, 3.0, 3.0])).number
    2
    """
    count = eigenvalues.size
    share = eigenvalues / eigenvalues.sum()
    drop = share[0] - share[-1]
    if count < 3 or drop <= 1e-9 * share[0]:
        return Elbow(0, f"{count} component(s), too few or too equal to make an elbow")
    below = 1.0 - np.arange(count) / (count - 1) - (share - share[-1]) / drop
    corner = int(below.argmax())
    if corner == 0:
        return Elbow(0, "the curve never falls below its chord: it turns flat nowhere")
    return Elbow(
        corner,
        f"component {corner} explains {100 * share[corner - 1]:.1f} %, the next one "
        f"{100 * share[corner]:.1f} %, and there the curve bends most",
    )


@dataclass(frozen=True, eq=False)
class ParallelAnalysis:
    """Components larger than those of a block whose features have been permuted one by one.

    Attributes
    ----------
    number : int
        Leading components above their limits.
    limits, means : ndarray of shape (n_components,)
        95 % point and mean of the permuted blocks' eigenvalues, in the unit of the block's own.
    draws : int
        Permuted blocks.
    """

    number: int
    limits: FloatArray
    means: FloatArray
    draws: int


def parallel_analysis(
    z: FloatArray, eigenvalues: FloatArray, *, draws: int | None = None, random_state: Seed
) -> ParallelAnalysis:
    """Parallel analysis by permutation: a component counts while it passes the 95 % point of its rank.

    The 95 % point is mean + 1.645 standard deviations over the draws. Strong components raise the limits of
    weak ones, and samples of unequal noise pass for components; hence not the rule here.

    Parameters
    ----------
    z : ndarray of shape (n_samples, n_features)
        Centred and scaled block.
    eigenvalues : ndarray of shape (n_components,)
        Its eigenvalues.
    draws : int, optional
        50, or 20 for blocks of more than 2,000,000 cells.
    random_state : int, SeedSequence, Generator or None

    References
    ----------
    Horn 1965, Psychometrika 30:179. Buja & Eyuboglu 1992, Multivariate Behavioral Research 27:509.
    """
    rng = np.random.default_rng(random_state)
    if draws is None:
        draws = MANY_DRAWS if z.size <= CELLS_FOR_MANY_DRAWS else FEW_DRAWS
    if draws < 2:
        raise NumericsError(f"{draws} permuted blocks; parallel analysis needs at least 2")
    count = eigenvalues.size
    drawn = np.stack([_descending(rng.permuted(z, axis=0))[:count] for _ in range(draws)]) / (z.shape[0] - 1)
    means = drawn.mean(axis=0)
    limits = means + ONE_SIDED_95 * drawn.std(axis=0, ddof=1)
    under = np.flatnonzero(eigenvalues <= limits)
    return ParallelAnalysis(int(under[0]) if under.size else count, limits, means, draws)


def _descending(z: FloatArray) -> FloatArray:
    """Squared singular values, largest first, from the smaller of the two products."""
    product = z @ z.T if z.shape[0] <= z.shape[1] else z.T @ z
    return np.asarray(np.linalg.eigvalsh(product)[::-1], dtype=np.float64)


@dataclass(frozen=True, eq=False)
class CrossValidatedComponents:
    """Prediction of held-out samples' held-out features from 0, 1, 2 ... components.

    Attributes
    ----------
    number : int
        Components of smallest error.
    errors : ndarray of shape (most + 1,)
        Squared error with 0, 1, ... components, as a share of that with none.
    folds, feature_folds, repeats : int
    """

    number: int
    errors: FloatArray
    folds: int
    feature_folds: int
    repeats: int


def cross_validated_components(
    z: FloatArray, *, folds: int = 5, feature_folds: int = 2, repeats: int = 2, random_state: Seed
) -> CrossValidatedComponents | None:
    """Bi-cross-validation of the number of components.

    Samples and features are both held out: the held-out corner ``A`` is predicted from the held-in rest as
    ``B D_k^+ C``, with ``D_k`` the held-in corner's first k components. Needs n x n matrices alone.

    Parameters
    ----------
    z : ndarray of shape (n_samples, n_features)
        Scaled block (the scaling itself is not learnt anew in the folds; the centring is).
    random_state : int, SeedSequence, Generator or None
        For the folds.

    Returns
    -------
    CrossValidatedComponents or None
        None with fewer than 6 samples or 4 features.

    References
    ----------
    Owen & Perry 2009, Annals of Applied Statistics 3:564 (after K. R. Gabriel).
    """
    n, p = z.shape
    if n < FEWEST_SAMPLES or p < FEWEST_FEATURES:
        return None
    rng = np.random.default_rng(random_state)
    held_in = n - -(-n // folds)
    most = min(held_in // 2, -(-p // feature_folds), MOST_CROSS_VALIDATED)
    errors = np.zeros(most + 1)
    for _ in range(repeats):
        part = rng.permutation(p) % feature_folds
        kernels = [z[:, part == side] @ z[:, part == side].T for side in range(feature_folds)]
        for train, test in balanced_folds(None, n, folds, rng):
            for target in kernels:
                errors += _corner_errors(target, sum(kernels) - target, train, test, most)
    return CrossValidatedComponents(int(errors.argmin()), errors / errors[0], folds, feature_folds, repeats)


def _corner_errors(
    target: FloatArray, source: FloatArray, train: NDArray[np.intp], test: NDArray[np.intp], most: int
) -> FloatArray:
    """Squared error of the held-out corner for 0 to ``most`` components, from the kernels of both sides.

    With ``D = U S V'`` the prediction is ``H C``, ``H = B D' U_k S_k^-2 U_k'``, and its squared error
    ``|A|^2 - 2 <A C', H> + <H C C', H>``.
    """
    target, source = _centred_on(target, train), _centred_on(source, train)
    values, vectors = np.linalg.eigh(source[np.ix_(train, train)])
    values, vectors = values[::-1][:most], vectors[:, ::-1][:, :most]
    usable = values > 1e-10 * values[0]
    steps = (source[np.ix_(test, train)] @ vectors) * np.where(
        usable, 1.0 / np.where(usable, values, 1.0), 0.0
    )
    crossed = target[np.ix_(test, train)] @ vectors
    inner = vectors.T @ target[np.ix_(train, train)] @ vectors
    alone = -2.0 * np.sum(steps * crossed, axis=0) + np.sum(steps**2, axis=0) * np.diag(inner)
    # Components enter one after the other: each brings its own terms and those with the ones before it.
    shared = 2.0 * np.triu((steps.T @ steps) * inner, 1).sum(axis=0)
    start = float(np.trace(target[np.ix_(test, test)]))
    return start + np.concatenate([[0.0], np.cumsum(alone + shared)])


def _centred_on(kernel: FloatArray, rows: NDArray[np.intp]) -> FloatArray:
    """Kernel of the block centred on the mean of some rows."""
    across = kernel[:, rows].mean(axis=1)
    centred: FloatArray = kernel - across[:, None] - across[None, :] + across[rows].mean()
    return centred
