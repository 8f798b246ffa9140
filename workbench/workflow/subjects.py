"""Several samples of one subject: the design that the sample sheet gives, and the level that is asked for."""

from __future__ import annotations

import re

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import SubjectDesign
from workbench.errors import InputError, NumericsError
from workbench.intake import Groups
from workbench.intake.kinds import column_numbers, present
from workbench.settings import Settings

DIGITS = re.compile(r"(\d+)")
MOST_VISITS = 8


def subject_columns(settings: Settings) -> list[str]:
    """Return the columns that tell subjects and the order of their samples."""
    samples = settings.samples
    return [column for column in (samples.subject, samples.time) if column is not None]


def subject_design(
    frame: pd.DataFrame, settings: Settings, groups: Groups | None, where: str
) -> SubjectDesign | None:
    """Return which samples are of one subject and in what order; None without a subject column.

    Without a time column, a group of which every subject has one sample at each level orders them (before and
    after, tumour and normal); otherwise they are replicates.

    Raises
    ------
    InputError
        When a subject has two samples at one time.
    """
    samples = settings.samples
    if samples.subject is None:
        return None
    subjects = frame[samples.subject].astype(str).to_numpy(dtype=object)
    times = None
    if samples.time is not None:
        times = _moments(frame[samples.time], samples.order.get(samples.time))
    elif groups is not None and _one_each(subjects, groups.codes):
        times = groups.codes
    try:
        return SubjectDesign.of(subjects.astype(str), times)
    except NumericsError as error:
        raise InputError(f"{where}: {error}") from error


def require_level(design: SubjectDesign | None, level: str | None, settings: Settings, where: str) -> None:
    """Refuse to pool several samples of one subject: one of the two questions has to be asked."""
    if design is None or design.kind == "single" or level is not None:
        return
    raise InputError(
        f"{where}: column '{settings.samples.subject}' has several samples of one subject ({design.reason}), and "
        "pooling them would make chance look like evidence; say which question is asked with level = "
        '"visits" (changes within subjects) or level = "subjects" (differences between subjects, on their means) '
        "under [analyses.NAME] in project.toml"
    )


def time_levels(series: pd.Series, order: tuple[str, ...] | None) -> tuple[str, ...]:
    """Return the values of a time column in order: as given, by number, or as text with its numbers by value.

    Examples
    --------
    >>> time_levels(pd.Series(["day10", "day2", "day2"]), None)
    ('day2', 'day10')
    """
    levels = sorted(set(present(series)))
    if order is not None:
        place = {level: k for k, level in enumerate(order)}
        return tuple(sorted(levels, key=lambda level: place.get(level, len(place))))
    numbers = column_numbers(series)
    if numbers is not None:
        return tuple(sorted(levels, key=lambda level: (float(level), level)))
    return tuple(sorted(levels, key=_natural))


def visit_lines(series: pd.Series, order: tuple[str, ...] | None) -> list[str]:
    """Return the order in which visits are taken, in words, where a column of text gives it."""
    levels = time_levels(series, order)
    if all(level.replace(".", "", 1).isdigit() for level in levels):
        return []
    shown = ", ".join(levels[:MOST_VISITS]) + (", ..." if len(levels) > MOST_VISITS else "")
    other = f"; another one is said with order = {{ {series.name} = [...] }} under [samples]"
    return [f"visits in the order {shown}{'' if order is not None else other}"]


def _moments(series: pd.Series, order: tuple[str, ...] | None) -> NDArray[np.float64]:
    numbers = column_numbers(series) if order is None else None
    if numbers is not None:
        return numbers.to_numpy(dtype=np.float64)
    place = {level: float(k) for k, level in enumerate(time_levels(series, order))}
    return np.asarray(present(series).map(place), dtype=np.float64)


def _natural(text: str) -> tuple[tuple[int, float, str], ...]:
    parts = [part for part in DIGITS.split(text) if part]
    return tuple((0, float(part), "") if part.isdigit() else (1, 0.0, part.lower()) for part in parts)


def _one_each(subjects: NDArray[np.object_], codes: NDArray[np.intp]) -> bool:
    """Return whether no subject has two samples of one group, and some have samples of two."""
    pairs = pd.DataFrame({"subject": subjects, "group": codes})
    twice = bool(pairs.duplicated().any())
    return not twice and bool(pairs.groupby("subject").size().gt(1).any())
