"""Tables that do not look like what they are declared to be are refused, unless the settings trust them."""

from __future__ import annotations

import numpy as np
import pytest
from prepare.measured import counts, intensities, log, table_of

from workbench.errors import InputError
from workbench.prepare import MeasuredTable, recipe_for
from workbench.settings import prepare_settings


def prepare(kind: str, table: MeasuredTable, **settings: object) -> None:
    recipe = recipe_for("x", kind, prepare_settings("x", kind, settings))
    recipe.fit(table, smallest_group=7, seed=1)


@pytest.mark.parametrize("base", [2, np.e, 10])
def test_logarithms_of_intensities_are_no_intensities(base: float) -> None:
    values = intensities().values
    logs = table_of(np.log(np.where(values > 0, values, np.nan)) / np.log(base))
    with pytest.raises(
        InputError,
        match=r'intensities from .* look like logarithms already; set values = "log" in .* check_values = false',
    ):
        prepare("intensities", logs)
    prepare("intensities", logs, check_values=False)


def test_small_concentrations_are_intensities_all_the_same() -> None:
    """Amounts of 40 compounds in micromole per litre, medians from 0.1 to 40."""
    rng = np.random.default_rng(1)
    prepare("intensities", table_of(rng.lognormal(0.7, 1.5, 40) * rng.lognormal(0, 0.4, (14, 40)) * 0.5))


@pytest.mark.parametrize("kind", ["counts", "intensities"])
def test_raw_values_are_no_logarithms(kind: str) -> None:
    table = {"counts": counts, "intensities": intensities}[kind]()
    with pytest.raises(
        InputError, match=r'do not look like logarithms; set values = "intensities" in .* \(or "counts"\)'
    ):
        prepare("log", table)


def test_small_counts_are_no_logarithms() -> None:
    small = table_of(np.random.default_rng(2).poisson(6, (14, 50)))
    with pytest.raises(InputError, match=r'all whole numbers, look like counts; set values = "counts" in'):
        prepare("log", small)
    prepare("log", small, check_values=False)


def test_logarithms_of_counts_are_no_counts() -> None:
    with pytest.raises(InputError, match="counts are not whole, the first at feature 'F1', sample 'S000'"):
        prepare("counts", table_of(np.log2(counts().values + 1)))


def test_logarithms_are_logarithms() -> None:
    prepare("log", log())
    prepare("log", table_of(np.random.default_rng(3).normal(0, 2, (14, 40))))
