"""Numbers that the declared kind of values does not allow: refused with their places, or told where they may be."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from workbench.errors import InputError

from .faults import LISTED_FAULTS, Faults, counted, shown
from .part import Part
from .raw import cell_text

PARTS_AT_MOST = 1.01
_CELLS_AT_ONCE = 2**18
NOT_BELOW_ZERO = (
    "logarithms come in with `--values log`, readings that go below zero with `--values continuous`"
)
EMPTY_CELLS = "cells that are below zero because a background was taken off, leave empty"


def check_range(part: Part, values: np.ndarray, kind: str) -> list[str]:
    """Refuse infinities, and negative or fractional counts; return notes about what is odd but allowed.

    Raises
    ------
    InputError
        With the place, feature and sample of five cells.
    """
    _refuse(part, values, np.isinf, "infinite", "leave such cells empty (missing), or mend what made them")
    if kind == "counts":
        other = "choose other values for this block (intensities, log, continuous) when it holds no counts"
        _refuse(
            part,
            values,
            _negative,
            "negative, though the values are counts",
            f"{NOT_BELOW_ZERO}; {EMPTY_CELLS}",
        )
        round_first = f"round estimated counts first; {other}"
        _refuse(part, values, _fractions, "not whole, though the values are counts", round_first)
    if kind == "proportions":
        other = "parts of a whole are 0 or more; log-ratios are values `log` or `continuous`"
        _refuse(part, values, _negative, "negative, though the values are proportions", other)
        return _check_parts(part, values)
    if kind == "beta":
        other = "divide percentages by 100; M-values are values `log`"
        _refuse(part, values, _no_share, "outside 0 to 1, though the values are beta", other)
    negative = _count(values, _negative) if kind == "intensities" else 0
    if not negative:
        return []
    return [
        f"{part.raw.path.name}: {counted(negative, 'intensity is', 'intensities are')} negative, and `prepare` refuses "
        f"that: {NOT_BELOW_ZERO}; {EMPTY_CELLS}, and replace the table (`add-block ... --replace`)"
    ]


def _check_parts(part: Part, values: np.ndarray) -> list[str]:
    """Refuse proportions that are no parts of a whole; return notes about samples that add up to too much.

    Parts add up to 1 at most, or to 100 (percentages), or to one and the same total in every sample (parts per
    million), each within one percent.
    """
    by_sample = 0 if part.samples_in == "columns" else 1
    sums = np.nansum(values, axis=by_sample)
    if not sums.size or not values.shape[1 - by_sample]:
        return []
    whole = 1.0 if np.nanmax(values, initial=0.0) <= PARTS_AT_MOST else 100.0
    over = sums > PARTS_AT_MOST * whole
    equal = bool(np.ptp(sums) <= (PARTS_AT_MOST - 1) * sums.max())
    if equal or not over.any():
        return []
    every = part.sample_names()
    names = [every[k] for k in np.flatnonzero(over)]
    told = ", ".join(
        f"{shown(name)} to {total:,.6g}" for name, total in zip(names[:3], sums[over][:3], strict=True)
    )
    if 2 * int(over.sum()) <= sums.size or whole == 1.0:
        return [
            f"{part.raw.path.name}: {counted(len(names), 'sample adds', 'samples add')} up to more than {whole:g} "
            f"({told}), though parts of one whole do not"
        ]
    finite = values[~np.isnan(values)]
    instead = "counts" if bool((finite == np.rint(finite)).all()) else "intensities"
    raise InputError(
        f"{part.raw.path}: the values are no proportions: {counted(len(names), 'sample adds', 'samples add')} up to "
        f"more than 100 ({told}); parts of a whole add up to 1 (100 in percent) at most, or to the same total in "
        f"every sample; these may be {instead}: declare what they are (values)"
    )


def _negative(values: np.ndarray) -> np.ndarray:
    found: np.ndarray = values < 0
    return found


def _no_share(values: np.ndarray) -> np.ndarray:
    found: np.ndarray = (values < 0) | (values > 1)
    return found


def _fractions(values: np.ndarray) -> np.ndarray:
    found: np.ndarray = (values != np.rint(values)) & (values == values)
    return found


def _count(values: np.ndarray, fault: Callable[[np.ndarray], np.ndarray]) -> int:
    """Return how many values have a fault, looked at in pieces, so that no second table stands in memory."""
    stored = values if values.flags.c_contiguous else values.T
    step = max(1, _CELLS_AT_ONCE // max(1, stored.shape[1]))
    pieces = range(0, len(stored), step)
    return sum(int(np.count_nonzero(fault(stored[start : start + step]))) for start in pieces)


def _refuse(
    part: Part, values: np.ndarray, fault: Callable[[np.ndarray], np.ndarray], what: str, way_out: str
) -> None:
    total = _count(values, fault)
    if not total:
        return
    faults = Faults(part.raw.path, total=total)
    for k, m in np.argwhere(fault(values))[:LISTED_FAULTS]:
        i, j = part.rows[k], part.columns[m]
        faults.kept.append(f"{part.named_place(i, j)}: {shown(cell_text(part.cell(i, j)))}")
    raise faults.error(f"{counted(total, 'cell is', 'cells are')} {what}", way_out)
