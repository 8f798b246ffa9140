"""The difference between groups of every feature of a block, whatever the samples are to each other."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from workbench.engine import GroupEffects, SubjectDesign, group_effects, subject_means
from workbench.engine.nuisance import indicators
from workbench.errors import NumericsError
from workbench.workflow.analysis_view import Shared

FloatArray = NDArray[np.float64]


def group_differences(values: FloatArray, shared: Shared) -> GroupEffects | None:
    """Return the group effects of a block's features, or None where this design cannot estimate them.

    Several samples of one subject are no independent witnesses. A group that subjects stay in is tested on their
    means; one that changes within subjects (before and after) is tested inside them, a term for each subject among
    the nuisance, which for two samples each is the paired t test.

    Parameters
    ----------
    values : ndarray of shape (n_samples, n_features)
    shared : Shared
        The samples, with groups.
    """
    assert shared.groups is not None
    codes = shared.groups.codes
    design = shared.subjects
    try:
        if design is None or design.kind == "single":
            return group_effects(values, codes, shared.nuisance)
        if _stays(design, codes):
            own = np.zeros(design.n_subjects, dtype=np.intp)
            own[design.subject] = codes
            return group_effects(subject_means(design, values), own, subject_means(design, shared.nuisance))
        return group_effects(values, codes, np.hstack([shared.nuisance, indicators(design.subject)]))
    except NumericsError:
        return None


def _stays(design: SubjectDesign, codes: NDArray[np.intp]) -> bool:
    """Return whether all samples of each subject are of one group."""
    pairs = np.unique(np.column_stack([design.subject, codes]), axis=0)
    return len(pairs) == design.n_subjects
