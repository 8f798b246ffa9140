"""Whether numbers can be what they are declared to be: logarithms of logarithms raise no error anywhere else."""

from __future__ import annotations

import numpy as np

from workbench.prepare.refusal import TRUST, VALUES, PrepareRefusal
from workbench.prepare.steps import column_range
from workbench.prepare.tables import MeasuredTable

LARGEST_LOG = 100.0
LARGEST_AS_LOG = 64.0
NARROWEST_SPAN = 10.0
FEWEST_TO_JUDGE = 20
SPAN_ENDS = (0.01, 0.99)


def check_no_logs(table: MeasuredTable) -> None:
    """Refuse intensities that look like logarithms.

    They do when, in a table of 20 features or more, no value is beyond 64 (2^64 is more than any instrument
    counts), some are not whole, and 98 % of the positive values lie within a factor of ten: amounts of different
    compounds span orders of magnitude, their logarithms do not.

    Raises
    ------
    PrepareRefusal
        Saying so.
    """
    if len(table.features) < FEWEST_TO_JUDGE:
        return
    positive = table.values[table.values > 0]
    if not positive.size or positive.max() > LARGEST_AS_LOG or not np.any(np.mod(positive, 1)):
        return
    low, high = np.quantile(positive, SPAN_ENDS)
    if high / low < NARROWEST_SPAN:
        raise PrepareRefusal(
            f"intensities from {positive.min():.4g} to {positive.max():.4g}, nearly all within a factor of "
            f"{high / low:.2g}, look like logarithms already",
            key=VALUES,
            fitting=("log",),
            trusted_by=TRUST,
        )


def check_logs(table: MeasuredTable) -> None:
    """Refuse logarithms that look raw.

    They do when a value is beyond 100 in size, or when all values are whole numbers of 0 and above (counts), in
    a table of 20 features or more.

    Raises
    ------
    PrepareRefusal
        Saying so.
    """
    if not table.features:
        return
    low, high = column_range(table.values)
    smallest, largest = (
        float(np.fmin.reduce(low, initial=np.inf)),
        float(np.fmax.reduce(high, initial=-np.inf)),
    )
    if max(-smallest, largest) > LARGEST_LOG and largest >= smallest:
        raise PrepareRefusal(
            f"values from {smallest:g} to {largest:g} do not look like logarithms",
            key=VALUES,
            fitting=("intensities", "counts"),
            trusted_by=TRUST,
        )
    known = table.values[~np.isnan(table.values)]
    if (
        len(table.features) >= FEWEST_TO_JUDGE
        and smallest >= 0
        and known.size
        and not np.any(np.mod(known, 1))
    ):
        raise PrepareRefusal(
            f"values from {smallest:g} to {largest:g}, all whole numbers, look like counts",
            key=VALUES,
            fitting=("counts",),
            trusted_by=TRUST,
        )
