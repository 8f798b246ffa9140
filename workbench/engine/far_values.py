"""Far values pulled in: one odd reading must not carry a correlation."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

#: Standard deviations from the centre beyond which a value is pulled in.
FAR = 3.0
ROUNDS = 6


def pull_in(residuals: FloatArray, freedom: int, far: float = FAR) -> FloatArray:
    """Residuals with values beyond ``far`` standard deviations set to that distance, until none is beyond.

    The standard deviation is that of the pulled-in values, so that one huge value does not hide another. A
    feature of two values stays one of two values: its correlations do not change. Looks at one block alone,
    and hence keeps what is independent of another block independent.

    Parameters
    ----------
    residuals : ndarray of shape (n_samples, n_features)
        Centred columns.
    freedom : int
        Degrees of freedom of their variance.
    far : float

    Examples
    --------
    >>> x = np.append(np.tile([-1.0, 1.0], 20), 40.0)[:, None]
    >>> pull_in(x, 40)[-1].round(1), pull_in(x[:-1], 39).max()
    (array([3.4]), np.float64(1.0))
    """
    result = np.array(residuals, dtype=np.float64)
    columns = np.arange(result.shape[1])
    for _ in range(ROUNDS):
        part = result[:, columns]
        limit = far * np.sqrt(np.einsum("ij,ij->j", part, part) / freedom)
        beyond = np.abs(part).max(axis=0) > limit * (1.0 + 1e-9)
        columns, part, limit = columns[beyond], part[:, beyond], limit[beyond]
        if columns.size == 0:
            break
        result[:, columns] = np.clip(part, -limit, limit)
    return result
