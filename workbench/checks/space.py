"""A block without its design: residuals, their directions among the samples, and those that carry signal."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.linear import ThinBasis, thin_basis
from workbench.engine.nuisance import Nuisance, standardise
from workbench.engine.scree import parallel_analysis
from workbench.engine.signal_components import signal_components
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]

DRAWS = 20


@dataclass(frozen=True, eq=False)
class DesignFree:
    """What is left of a block when nuisance and group are taken out.

    Attributes
    ----------
    values : ndarray of shape (n_samples, n_features)
        Residuals at unit variance; features without any left are gone.
    basis : ThinBasis
        Directions of ``values``.
    number : int
        How many components stand out of noise.
    nuisance : Nuisance
        What was taken out.
    room : ndarray of shape (n_samples,)
        Share of each sample that the design leaves free, ``1 - h``.
    """

    values: FloatArray
    basis: ThinBasis
    number: int
    nuisance: Nuisance
    room: FloatArray

    @property
    def scores(self) -> FloatArray:
        """Scores of the components with signal, shape (n_samples, number), strongest first."""
        scores: FloatArray = self.basis.vectors[:, : self.number] * self.basis.lengths[: self.number]
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
    return DesignFree(block.values, basis, signal_number(block.values, basis), nuisance, room)


def signal_number(values: FloatArray, basis: ThinBasis) -> int:
    """Return how many components of a centred and scaled block stand out of noise.

    By :func:`~workbench.engine.signal_components.signal_components`; with fewer features than samples at most
    as many as parallel analysis finds (20 draws, a fixed seed), as few features of unequal noise pass for signal.
    """
    number = signal_components(basis).number
    n, p = values.shape
    if p < n and number > 0:
        eigenvalues = basis.lengths**2 / (n - 1)
        number = min(number, parallel_analysis(values, eigenvalues, draws=DRAWS, random_state=0).number)
    return number
