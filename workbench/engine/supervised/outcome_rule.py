"""From predicted codes to classes and their probabilities, learnt from samples that were held out."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class ClassRule:
    """Linear discrimination of predicted codes, equal priors.

    Attributes
    ----------
    directions : ndarray of shape (n_columns, 1 or n_classes)
        Log odds are ``values @ directions + offsets``; two classes have one column, that of the second.
    offsets : ndarray of shape (1 or n_classes,)
    cut : float
        For two classes, the value that parts them: the middle of the class means; 0 for more classes.
    """

    directions: FloatArray
    offsets: FloatArray
    cut: float

    def decision(self, values: FloatArray) -> FloatArray:
        """How strongly each sample belongs to each class; one column for two classes, positive for the second.

        Two classes are parted by the cut even where held-out samples gave no slope.
        """
        if self.directions.shape[1] == 1:
            return values - self.cut
        return values @ self.directions + self.offsets

    def classes(self, values: FloatArray) -> IndexArray:
        """Class of each sample, from 0."""
        decision = self.decision(values)
        if decision.shape[1] == 1:
            return np.asarray(decision[:, 0] > 0.0, dtype=np.intp)
        return np.asarray(decision.argmax(axis=1), dtype=np.intp)

    def probabilities(self, values: FloatArray) -> FloatArray:
        """Probability of each class if all were equally frequent, shape (n_samples, n_classes)."""
        odds = values @ self.directions + self.offsets
        if odds.shape[1] == 1:
            odds = np.hstack([np.zeros_like(odds), odds])
        odds = np.exp(odds - odds.max(axis=1, keepdims=True))
        shares: FloatArray = odds / odds.sum(axis=1, keepdims=True)
        return shares


def learn_rule(values: FloatArray, codes: IndexArray, n_classes: int) -> ClassRule:
    """Learn the rule from predicted codes and the classes of the same samples.

    With values of samples that were held out the rule is honest: noise gives probabilities near
    ``1 / n_classes``. Two classes: slope ``(m_1 - m_0) / s^2`` of the log odds, at least 0, ``s^2`` the
    pooled variance within classes; more: ``m_g' S^+ v - m_g' S^+ m_g / 2``.

    Parameters
    ----------
    values : ndarray of shape (n_samples, 1 or n_classes)
    codes : ndarray of int, shape (n_samples,)
        Every class from 0 to ``n_classes - 1`` has a sample.
    n_classes : int

    Examples
    --------
    >>> rule = learn_rule(np.array([[-3.0], [-1.0], [2.0], [4.0]]), np.array([0, 0, 1, 1]), 2)
    >>> rule.cut, rule.classes(np.array([[0.0], [1.0]])), rule.probabilities(np.array([[0.5]]))
    (0.5, array([0, 1]), array([[0.5, 0.5]]))
    """
    means = np.array([values[codes == g].mean(axis=0) for g in range(n_classes)])
    within = values - means[codes]
    pooled = within.T @ within / max(codes.size - n_classes, 1)
    if n_classes == 2:
        gap, cut = float(means[1, 0] - means[0, 0]), float(means[:, 0].mean())
        slope = max(gap, 0.0) / pooled[0, 0] if pooled[0, 0] > 0.0 else 0.0
        return ClassRule(np.array([[slope]]), np.array([-slope * cut]), cut)
    directions = np.linalg.pinv(pooled, rcond=1e-8, hermitian=True) @ means.T
    return ClassRule(directions, -0.5 * np.einsum("gk,kg->g", means, directions), 0.0)
