"""Layers as the search for swapped samples sees them: design, factors, and what each row says of its design."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workbench.engine.linear import thin_basis
from workbench.engine.nuisance import Nuisance, check_finite, standardise
from workbench.engine.signal_components import signal_components
from workbench.engine.swaps.exchange_gain import (
    exchange_gains,
    pair_distances,
    rearrangement_gains,
    relabelling_gains,
)
from workbench.engine.swaps.sparse_factors import SparseFactors, refined, sparse_factors
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
BoolArray = NDArray[np.bool_]

COMPONENTS_PER_DF = 3
REFIT_ROUNDS = 4
SAME_COLUMN = 1e-9
APART = 2.0


@dataclass(frozen=True, eq=False)
class SwapLayer:
    """One layer's prepared values, with what is known about its samples.

    Attributes
    ----------
    name : str
    values : ndarray of shape (n_samples, n_features)
        Prepared, without gaps.
    samples : ndarray of int, shape (n_samples,)
        Which sample of the study each row is; each once.
    batch : ndarray of shape (n_samples, n_columns) or None
        Columns of the assay (run days, run order) that may stay where they are when tubes are exchanged.
    group : ndarray of shape (n_samples, n_columns) or None
        Columns of the sample itself (group, age).
    """

    name: str
    values: FloatArray
    samples: IndexArray
    batch: FloatArray | None = None
    group: FloatArray | None = None

    def design(self) -> FloatArray:
        """Return all columns of the design, without intercept."""
        empty = np.empty((self.values.shape[0], 0))
        return np.hstack([empty, *(part for part in (self.batch, self.group) if part is not None)])


@dataclass(frozen=True, eq=False)
class LayerState:
    """A layer in one arrangement of its rows.

    Attributes
    ----------
    layer : SwapLayer
    values : ndarray of shape (n_samples, n_features)
        Centred, in units of the residual standard deviation, rows as now arranged.
    nuisance : Nuisance
        Of the layer's whole design.
    factors : SparseFactors
        Of the residuals.
    components : ndarray of shape (n_samples, m)
        Leading components of the values with the design left in.
    order : ndarray of int, shape (n_samples,)
        The delivered row that is now at each place.
    """

    layer: SwapLayer
    values: FloatArray
    nuisance: Nuisance
    factors: SparseFactors
    components: FloatArray
    order: IndexArray

    @property
    def df(self) -> int:
        """Samples less dimensions of the design."""
        return self.nuisance.n_samples - self.nuisance.rank

    @property
    def residuals(self) -> FloatArray:
        """Values without the design."""
        return self.nuisance.residuals(self.values)

    @property
    def design_told(self) -> bool:
        """Whether there is a design that rows could contradict."""
        return self.nuisance.rank > 1 and self.components.shape[1] > 0

    def hat(self) -> FloatArray:
        """Return the projection onto the design."""
        projection: FloatArray = self.nuisance.basis @ self.nuisance.basis.T
        return projection

    def design_gains(self, tubes: bool) -> FloatArray:
        """Return what exchanging each two rows gains in agreement with the design, shape (n, n).

        Parameters
        ----------
        tubes : bool
            The batch columns stay where they are, the group's go with the tubes; for pairs that
            :meth:`compared` leaves out it is 0.
        """
        n = self.order.size
        if not self.design_told:
            return np.zeros((n, n))
        if not tubes:
            return exchange_gains(self.components, self.hat(), self.df)
        first, second = np.nonzero(self.compared(True))
        places = np.column_stack([first, second])
        gains = np.zeros((n, n))
        gains[first, second] = self.moves_gain(places, places[:, ::-1], True)
        return gains + gains.T

    def moves_gain(self, places: IndexArray, sources: IndexArray, tubes: bool) -> FloatArray:
        """Return what each of several rearrangements gains in agreement with the design, shape (count,)."""
        if not self.design_told:
            return np.zeros(len(places))
        if not tubes:
            return rearrangement_gains(self.components, self.hat(), self.df, places, sources)
        n, group = self.order.size, self.layer.group
        fixed = Nuisance.of(self.layer.batch, n).basis
        columns = np.empty((n, 0)) if group is None else group
        return relabelling_gains(self.components, fixed, columns, self.df, places, sources)

    def compared(self, tubes: bool) -> BoolArray:
        """Return the pairs above the diagonal; for tubes those alone whose batch columns differ."""
        n = self.order.size
        above = np.triu(np.ones((n, n), dtype=bool), 1)
        if not tubes:
            return above
        return above & _differ(self.layer.batch, n)

    def differ_in_group(self) -> BoolArray:
        """Return the pairs whose group columns differ."""
        return _differ(self.layer.group, self.order.size)

    def apart(self) -> BoolArray:
        """Return the pairs of rows that the design expects to differ in the components.

        Their fitted rows lie farther apart than two residual standard deviations (Mahalanobis).
        """
        fitted = self.hat() @ self.components
        residual = self.components - fitted
        inverse = np.asarray(
            np.linalg.pinv(residual.T @ residual / self.df, hermitian=True), dtype=np.float64
        )
        return np.asarray(pair_distances(fitted, inverse) > APART**2)

    def batch_part(self, rows: FloatArray) -> FloatArray:
        """Return what the batch columns explain of some rows, the whole design fitted."""
        batch = self.layer.batch
        if batch is None or batch.shape[1] == 0:
            return np.zeros_like(rows)
        columns = self.layer.design()
        columns = columns - columns.mean(axis=0)
        size = np.linalg.norm(columns, axis=0)
        columns = columns / np.where(size > 0.0, size, 1.0)
        coefficients = np.linalg.lstsq(columns, rows, rcond=None)[0]
        part: FloatArray = columns[:, : batch.shape[1]] @ coefficients[: batch.shape[1]]
        return part

    def rearranged(self, places: IndexArray, sources: IndexArray, tubes: bool) -> LayerState:
        """Return the layer with row ``sources[k]`` at place ``places[k]``, factors refitted from these."""
        order = np.arange(self.order.size)
        order[places] = sources
        stays = self.batch_part(self.values) if tubes else 0.0
        values = (self.values - stays)[order] + stays
        moved = self.factors.scores[order]
        factors = self.factors
        if factors.number:
            residuals = self.nuisance.residuals(values)
            factors = refined(residuals, self.nuisance.rank, moved, factors.law, REFIT_ROUNDS)
        return replace(
            self,
            values=values,
            factors=factors,
            components=_components(values, self.df),
            order=self.order[order],
        )

    def settled(self) -> LayerState:
        """Return the layer with its factors found anew."""
        return replace(self, factors=sparse_factors(self.residuals, self.nuisance.rank))


def layer_state(layer: SwapLayer) -> LayerState:
    """Return a layer as it was delivered.

    Raises
    ------
    NumericsError
        When values are not finite, nothing varies, or the design leaves no degree of freedom.
    """
    values = check_finite(layer.values, f"layer '{layer.name}'")
    n = values.shape[0]
    if layer.samples.shape != (n,) or np.unique(layer.samples).size != n:
        raise NumericsError(
            f"layer '{layer.name}' has {n} rows for {np.unique(layer.samples).size} different samples; give "
            "each row a sample of its own"
        )
    nuisance = Nuisance.of(layer.design(), n)
    standard = standardise(values, nuisance)
    centred = values[:, standard.kept] - values[:, standard.kept].mean(axis=0)
    scaled = centred / standard.scale
    factors = sparse_factors(standard.values, nuisance.rank)
    return LayerState(layer, scaled, nuisance, factors, _components(scaled, n - nuisance.rank), np.arange(n))


def _differ(columns: FloatArray | None, n: int) -> BoolArray:
    """Return the pairs of rows that differ in any of some columns."""
    if columns is None or columns.shape[1] == 0:
        return np.zeros((n, n), dtype=bool)
    size = np.maximum(np.abs(columns).max(axis=0), 1e-300)
    return np.asarray((np.abs(columns[:, None] - columns) / size > SAME_COLUMN).any(axis=2))


def _components(values: FloatArray, df: int) -> FloatArray:
    """Return the leading components, as many as carry signal, no more than a third of ``df``."""
    basis = thin_basis(values)
    number = min(signal_components(basis).number, df // COMPONENTS_PER_DF)
    components: FloatArray = basis.vectors[:, :number] * np.sqrt(values.shape[0])
    return components
