"""A block without its design: residuals, their directions among the samples, and those that carry signal."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.linear import ThinBasis, thin_basis
from workbench.engine.nuisance import Nuisance, standardise
from workbench.engine.signal_components import SignalComponents, signal_components
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class DesignFree:
    """What is left of a block when nuisance and group are taken out.

    Attributes
    ----------
    values : ndarray of shape (n_samples, n_features)
        Residuals at unit variance; features without any left are gone.
    basis : ThinBasis
        Directions of ``values``.
    signal : SignalComponents
        Those that stand out of noise.
    nuisance : Nuisance
        What was taken out.
    room : ndarray of shape (n_samples,)
        Share of each sample that the design leaves free, ``1 - h``.
    """

    values: FloatArray
    basis: ThinBasis
    signal: SignalComponents
    nuisance: Nuisance
    room: FloatArray

    @property
    def scores(self) -> FloatArray:
        """Scores of the components with signal, shape (n_samples, number), strongest first."""
        k = self.signal.number
        scores: FloatArray = self.basis.vectors[:, :k] * self.basis.lengths[:k]
        return scores


def design_free(prepared: FloatArray, design: FloatArray) -> DesignFree | None:
    """Return a block without its design, or None where too little is left to look at.

    Parameters
    ----------
    prepared : ndarray of shape (n_samples, n_features)
    design : ndarray of shape (n_samples, n_columns)
        Nuisance and group, without intercept.
    """
    n = prepared.shape[0]
    if n < 3:
        return None
    nuisance = Nuisance.of(design, n)
    try:
        block = standardise(prepared, nuisance)
        basis = thin_basis(block.values)
    except NumericsError:
        return None
    room = 1.0 - np.sum(nuisance.basis**2, axis=1)
    return DesignFree(block.values, basis, signal_components(basis), nuisance, room)
