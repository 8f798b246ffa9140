"""The number of components that carry signal: one number by a stated rule, and older suggestions beside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.folds import Seed
from workbench.engine.linear import ThinBasis, thin_basis
from workbench.engine.scree import (
    CrossValidatedComponents,
    Elbow,
    ParallelAnalysis,
    cross_validated_components,
    elbow,
    parallel_analysis,
)
from workbench.engine.signal_components import SIGNAL_LEVEL, SignalComponents, signal_components

FloatArray = NDArray[np.float64]

RULE = (
    "a component counts, and all before it, when its variance passes what noise like that of the components "
    "after it stays under in 99 of 100 blocks, all samples scaled to equal noise"
)
NARROW_RULE = RULE + "; at most as many as parallel analysis finds, as samples outnumber features"


@dataclass(frozen=True, eq=False)
class ComponentNumber:
    """How many components carry signal, by the rule and by three older ones.

    Attributes
    ----------
    number : int
        The one number.
    rule : str
        The rule that gave it, in words.
    signal : SignalComponents
        The rule's own figures.
    elbow : Elbow
    parallel : ParallelAnalysis
    cross_validated : CrossValidatedComponents or None
        None where there are too few samples or features for it.
    shares : ndarray of shape (rank,)
        For each principal component the share of its scores' variance that lies in the space of the signal.
    """

    number: int
    rule: str
    signal: SignalComponents
    elbow: Elbow
    parallel: ParallelAnalysis
    cross_validated: CrossValidatedComponents | None
    shares: FloatArray


def choose_number(
    z: FloatArray, *, random_state: Seed, basis: ThinBasis | None = None, draws: int | None = None
) -> ComponentNumber:
    """How many principal components of a block carry signal, with older suggestions beside it.

    The rule is that of :func:`~workbench.engine.signal_components.signal_components` at level 0.01. With
    fewer features than samples it is held to parallel analysis, as unequal noise of few features passes for
    signal. In 200 simulated blocks (24 to 96 samples, 200 to 3,000 features, 0 to 8 factors) the number was
    never too large, and at most one too small in 87 % of those whose factors all can be seen when the noise is
    known; tests/benchmarks/components_number.py prints the table.

    Parameters
    ----------
    z : ndarray of shape (n_samples, n_features)
        Centred and scaled block.
    random_state : int, SeedSequence, Generator or None
        For the permutations of parallel analysis and the folds of cross-validation.
    basis : ThinBasis, optional
        Of ``z``, when it is there already.
    draws : int, optional
        Permuted blocks of the parallel analysis; by the size of the block when left out.
    """
    basis = thin_basis(z) if basis is None else basis
    eigenvalues = basis.lengths**2 / (z.shape[0] - 1)
    rng = np.random.default_rng(random_state)
    signal = signal_components(basis, SIGNAL_LEVEL)
    parallel = parallel_analysis(z, eigenvalues, draws=draws, random_state=rng)
    narrow = z.shape[1] < z.shape[0]
    number = min(signal.number, parallel.number) if narrow else signal.number
    inside: FloatArray = np.sum((signal.directions.T @ basis.vectors) ** 2, axis=0)
    return ComponentNumber(
        number,
        NARROW_RULE if narrow else RULE,
        signal,
        elbow(eigenvalues),
        parallel,
        cross_validated_components(z, random_state=rng),
        np.minimum(inside, 1.0),
    )
