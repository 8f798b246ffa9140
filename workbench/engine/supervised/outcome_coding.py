"""Classes as numbers for a regression in which each class counts alike."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


def balanced_codes(labels: IndexArray, n_classes: int) -> FloatArray:
    """Codes whose products with features are distances of the class means from their unweighted mean.

    Class ``g`` of ``G`` has the column ``(n / G) (1[g] / n_g - mean_h 1[h] / n_h)``, which adds up to 0 over
    the samples; two classes need one column, ``(n / 2) (1[1] / n_1 - 1[0] / n_0)``. A class without samples
    counts for nothing.

    Parameters
    ----------
    labels : ndarray of int, shape (n_samples, n_arrangements)
        Classes from 0, one column for each arrangement.
    n_classes : int

    Returns
    -------
    ndarray of shape (n_samples, 1 or n_classes, n_arrangements)

    References
    ----------
    Barker & Rayens 2003, J Chemometrics 17:166.

    Examples
    --------
    >>> balanced_codes(np.array([[0], [0], [0], [1]]), 2)[:, 0, 0].round(3)
    array([-0.667, -0.667, -0.667,  2.   ])
    """
    belongs = labels[:, None, :] == np.arange(n_classes)[:, None]
    counts = belongs.sum(axis=0)
    means = np.divide(belongs, counts, out=np.zeros(belongs.shape), where=counts > 0)
    means[:, :, (counts == 0).any(axis=0) & (n_classes == 2)] = 0.0
    if n_classes == 2:
        codes: FloatArray = labels.shape[0] / 2.0 * (means[:, 1:] - means[:, :1])
        return codes
    held = np.maximum((counts > 0).sum(axis=0), 1)
    centred: FloatArray = means - np.where(counts > 0, 1.0, 0.0) * means.sum(axis=1, keepdims=True) / held
    balanced: FloatArray = labels.shape[0] / n_classes * centred
    return balanced
