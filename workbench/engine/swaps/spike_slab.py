"""Estimates drawn towards zero as far as most of them are zero: a spike and a normal slab, learnt from all."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import expit

FloatArray = NDArray[np.float64]

START_SHARE = 0.2
START_VARIANCE = 9.0
SHARE_RANGE = (1e-4, 1.0 - 1e-4)
SMALLEST_VARIANCE = 0.1


@dataclass(frozen=True, eq=False)
class SpikeSlab:
    """Law of the true effects behind rows of estimates whose errors have unit variance.

    In row k an effect is zero with probability ``1 - share[k]`` and normal with variance ``variance[k]``
    otherwise.

    Attributes
    ----------
    share, variance : ndarray of shape (n_rows,)

    References
    ----------
    Johnstone & Silverman 2004, Annals of Statistics 32:1594 (empirical Bayes selection of the weight).

    Examples
    --------
    >>> z = np.zeros((1, 1000))
    >>> z[0] = np.random.default_rng(0).normal(size=1000)
    >>> z[0, :20] += 8.0
    >>> law = SpikeSlab.learn(z)
    >>> shrunk = law.mean(z)[0]
    >>> bool(np.abs(shrunk[20:]).mean() < 0.1), bool(shrunk[:20].min() > 4.0)
    (True, True)
    """

    share: FloatArray
    variance: FloatArray

    @classmethod
    def learn(cls, z: FloatArray, rounds: int = 30) -> SpikeSlab:
        """Learn each row's law by expectation and maximisation.

        Parameters
        ----------
        z : ndarray of shape (n_rows, n_estimates)
            Estimates over their standard errors.
        rounds : int
            Steps from a share of ``START_SHARE`` and a variance of ``START_VARIANCE``.
        """
        rows = z.shape[0]
        return cls(np.full(rows, START_SHARE), np.full(rows, START_VARIANCE)).renewed(z, rounds)

    def renewed(self, z: FloatArray, rounds: int) -> SpikeSlab:
        """Return the law after further steps on (other) estimates, starting from this one."""
        law, squares = self, z**2
        for _ in range(rounds):
            chance = law._slab(squares)
            total = chance.sum(axis=1)
            variance = np.einsum("kp,kp->k", chance, squares) / np.maximum(total, 1e-300) - 1.0
            law = SpikeSlab(
                np.clip(total / z.shape[1], *SHARE_RANGE), np.maximum(variance, SMALLEST_VARIANCE)
            )
        return law

    def mean(self, z: FloatArray) -> FloatArray:
        """Return the expected effects given the estimates, shape (n_rows, n_estimates)."""
        expected: FloatArray = z * (self._slab(z**2) * (self.variance / (1.0 + self.variance))[:, None])
        return expected

    def _slab(self, squares: FloatArray) -> FloatArray:
        """Return the chance that each effect is not zero."""
        start = np.log(self.share / (1.0 - self.share)) - 0.5 * np.log1p(self.variance)
        slope = 0.5 * self.variance / (1.0 + self.variance)
        chance: FloatArray = expit(start[:, None] + slope[:, None] * squares)
        return chance
