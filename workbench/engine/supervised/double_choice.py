"""How many components: from losses of samples that were held out, for many arrangements at once."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


def fewest_as_good(losses: FloatArray, weights: FloatArray) -> IndexArray:
    """Return, for each arrangement, the first candidate whose mean loss is within one standard error of the best.

    The standard error is that of the difference from the best candidate on the same samples: candidates that
    fail on the same samples are told apart by the others.

    Parameters
    ----------
    losses : ndarray of shape (n_candidates, n_samples, n_arrangements)
        Candidates in the order of preference, fewest first.
    weights : ndarray of shape (n_samples, n_arrangements)
        Adding up to 1 over the samples.

    Returns
    -------
    ndarray of int, shape (n_arrangements,)
        Positions of the candidates.

    Examples
    --------
    >>> losses = np.array([[[1.0], [0.2]], [[0.9], [0.2]], [[0.1], [0.1]]])
    >>> fewest_as_good(losses, np.full((2, 1), 0.5))
    array([2])
    """
    means = np.einsum("knp,np->kp", losses, weights)
    best = means.argmin(axis=0)
    excess = losses - np.take_along_axis(losses, best[None, None, :], axis=0)
    gap = means - means.min(axis=0)
    errors = np.sqrt(np.einsum("knp,np->kp", (excess - gap[:, None]) ** 2, weights**2))
    good: IndexArray = (gap <= errors).argmax(axis=0)
    return good


def ranking_losses(scores: FloatArray, belongs: NDArray[np.bool_]) -> FloatArray:
    """Return for each sample the share of the other class that is ranked on the wrong side of it.

    The mean over a class's samples is 1 less the area under the ROC curve; ties count half.

    Parameters
    ----------
    scores : ndarray of shape (..., n_samples, n_arrangements)
        Higher for samples that belong.
    belongs : ndarray of bool, shape (n_samples, n_arrangements)

    Returns
    -------
    ndarray of the shape of ``scores``
        0.5 throughout where a class has no sample.

    References
    ----------
    DeLong, DeLong & Clarke-Pearson 1988, Biometrics 44:837 (placements).

    Examples
    --------
    >>> ranking_losses(np.array([[0.1], [0.4], [0.4], [0.9]]), np.array([[0], [1], [0], [1]]) == 1).ravel()
    array([0.  , 0.25, 0.25, 0.  ])
    """
    belongs = np.broadcast_to(belongs, scores.shape)
    order = np.argsort(scores, axis=-2, kind="stable")
    ranked = np.take_along_axis(scores, order, axis=-2)
    inside = np.take_along_axis(belongs, order, axis=-2)
    below_out, below_in = _counts_below(ranked, ~inside), _counts_below(ranked, inside)
    n_in = belongs.sum(axis=-2, keepdims=True)
    n_out = belongs.shape[-2] - n_in
    with np.errstate(invalid="ignore", divide="ignore"):
        wrong = np.where(inside, 1.0 - below_out / n_out, below_in / n_in)
    losses = np.empty_like(wrong)
    np.put_along_axis(losses, order, wrong, axis=-2)
    return np.where((n_in == 0) | (n_out == 0), 0.5, losses)


def _counts_below(ranked: FloatArray, marked: NDArray[np.bool_]) -> FloatArray:
    """How many marked samples have a lower score, those with an equal one counted half; scores are sorted."""
    n = ranked.shape[-2]
    running = np.cumsum(marked, axis=-2, dtype=np.float64)
    before = np.concatenate([np.zeros_like(running[..., :1, :]), running[..., :-1, :]], axis=-2)
    place = np.arange(n).reshape(-1, 1)
    new = np.ones(ranked.shape, dtype=bool)
    new[..., 1:, :] = ranked[..., 1:, :] > ranked[..., :-1, :]
    first = np.maximum.accumulate(np.where(new, place, 0), axis=-2)
    ends = np.ones(ranked.shape, dtype=bool)
    ends[..., :-1, :] = new[..., 1:, :]
    last = np.flip(np.minimum.accumulate(np.flip(np.where(ends, place, n - 1), axis=-2), axis=-2), axis=-2)
    under: FloatArray = np.take_along_axis(before, first, axis=-2)
    upto: FloatArray = np.take_along_axis(running, last, axis=-2)
    return 0.5 * (under + upto)
