"""Decimal marks and thousands separators: taken where the whole body agrees on one reading, else refused."""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np

from .tokens import number_of

BLANKS = " \u00a0\u202f\u2009"
_THOUSAND = 1000
_APOSTROPHES = "'\u2019"
_TAIL = r"(?:[eE][+-]?\d+)?"
_GROUPED = r"[+-]?[1-9]\d{{0,2}}(?:(?P<mark>[{marks}])\d{{3}})(?:(?P=mark)\d{{3}})*(?:{decimal}\d*)?"
_SHOWN = {".": "points", ",": "commas", " ": "blanks", "'": "apostrophes"}


@dataclass(frozen=True)
class Marks:
    """How the numbers of a table are written.

    Attributes
    ----------
    decimal
        ``.`` or ``,``.
    thousands
        What parts thousands: ``.``, ``,``, a blank (of any kind), an apostrophe, or nothing.
    """

    decimal: str = "."
    thousands: str = ""

    @property
    def plain(self) -> bool:
        """Whether numbers are written as ``float`` reads them."""
        return self.decimal == "." and not self.thousands

    def number(self, text: str) -> float | None:
        """Return the number that a text is in this writing, or None.

        >>> Marks(",", ".").number("1.234,5"), Marks(",").number("1.5"), Marks(".", ",").number("12,34")
        (1234.5, None, None)
        """
        if self.plain:
            return number_of(text)
        found = _WRITINGS[self.decimal].read(text)
        if found is None or (found[1] and found[1] != self.thousands):
            return None
        return found[0]

    def told(self) -> str:
        """Return the writing in words."""
        mark = "decimal commas" if self.decimal == "," else "decimal points"
        return f"{mark}, thousands apart by {_SHOWN[self.thousands]}" if self.thousands else mark


PLAIN = Marks()


@dataclass(frozen=True)
class _Writing:
    """Numbers with one decimal mark, with or without separators between thousands."""

    decimal: str
    bare: re.Pattern[str]
    grouped: re.Pattern[str]

    def read(self, text: str) -> tuple[float, str] | None:
        """Return the number and what parts its thousands, or None."""
        if self.bare.fullmatch(text):
            return float(text.replace(self.decimal, ".")), ""
        found = self.grouped.fullmatch(text)
        if found is None:
            return None
        mark = found["mark"]
        digits = text.replace(mark, "").replace(self.decimal, ".")
        return float(digits), " " if mark in BLANKS else "'" if mark in _APOSTROPHES else mark


def _writing(decimal: str) -> _Writing:
    mark, other = re.escape(decimal), "," if decimal == "." else "."
    bare = rf"[+-]?(?:\d+{mark}?\d*|{mark}\d+){_TAIL}"
    grouped = _GROUPED.format(marks=re.escape(other) + BLANKS + _APOSTROPHES, decimal=mark)
    return _Writing(decimal, re.compile(bare, re.ASCII), re.compile(grouped, re.ASCII))


_WRITINGS = {decimal: _writing(decimal) for decimal in ".,"}


@dataclass
class MarkFinder:
    """Looks at every number of a table and tells which writing all of them agree on.

    Parameters
    ----------
    decimal
        The decimal mark that a person has named; then only that one is looked for.
    whole
        Whether all numbers are whole (counts): then a reading that makes fractions is none.
    """

    decimal: str | None = None
    whole: bool = False
    views: dict[str, _View] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.views = {mark: _View(_WRITINGS[mark]) for mark in ([self.decimal] if self.decimal else ".,")}

    def look(self, texts: Iterable[str]) -> None:
        """Look at the texts of cells, without blanks at their ends; those that are no number in any writing pass."""
        for text in texts:
            found = [view.writing.read(text) for view in self.views.values()]
            if any(found):
                for view, one in zip(self.views.values(), found, strict=True):
                    view.add(text, one)

    def marks(self) -> Marks | None:
        """Return the only writing that fits all numbers looked at, or None when there is none, or several.

        Two writings that give the same numbers count as one. Without a decimal mark named, a writing with
        separators fits only if every number from a thousand on has them; and where other numbers have the
        decimal mark, a point or comma counts as a separator only if one number at least shows what it is, by
        having both (``1,234.5``) or two of it (``1,234,567``). So a single ``1,234`` among numbers such as
        ``0.5``, perhaps a slip, is not taken for a thousand.
        """
        fitting = self._fitting()
        if len(fitting) == 1 or (len(fitting) > 1 and not self._differ(fitting)):
            return fitting[0].found()
        return None

    @property
    def unclear(self) -> bool:
        """Whether several writings fit and give different numbers."""
        fitting = self._fitting()
        return len(fitting) > 1 and self._differ(fitting)

    @property
    def only(self) -> str | None:
        """The decimal mark of the one writing that is still possible, or None."""
        possible = [mark for mark, view in self.views.items() if not view.misfit]
        return possible[0] if len(possible) == 1 else None

    def take(self, numbers: np.ndarray, mark: str, *, decimals: bool) -> None:
        """Take in numbers without separators, read in the only writing that is still possible."""
        view = self.views[mark]
        finite = numbers[np.isfinite(numbers)]
        view.fraction |= bool((finite != np.rint(finite)).any())
        view.bare_thousand |= bool((np.abs(finite) >= _THOUSAND).any())
        view.decimals |= decimals
        view.marked |= decimals

    def _fitting(self) -> list[_View]:
        named = self.decimal is not None
        return [view for view in self.views.values() if view.fits(self.whole, named=named)]

    @staticmethod
    def _differ(views: list[_View]) -> bool:
        return any(view.marked for view in views)


@dataclass
class _View:
    """What the numbers of a table are in one writing."""

    writing: _Writing
    misfit: bool = False
    thousands: set[str] = field(default_factory=set)
    fraction: bool = False
    bare_thousand: bool = False
    sure: bool = False
    marked: bool = False  # a cell with a point or a comma, which the other writing would read otherwise
    decimals: bool = False

    def add(self, text: str, found: tuple[float, str] | None) -> None:
        """Take one cell's number in; None is a cell that is a number in the other writing only."""
        if found is None:
            self.misfit = True
            return
        number, mark = found
        has_decimal = self.writing.decimal in text
        self.marked |= has_decimal or mark in (".", ",")
        self.fraction |= number != number // 1
        self.decimals |= has_decimal
        if mark:
            self.thousands.add(mark)
            self.sure |= has_decimal or mark not in ".," or text.count(mark) > 1
        elif abs(number) >= _THOUSAND:
            self.bare_thousand = True

    def fits(self, whole: bool, *, named: bool) -> bool:
        """Whether all cells agree on this writing."""
        if self.misfit or len(self.thousands) > 1 or (whole and self.fraction):
            return False
        if named or not self.thousands:
            return True
        return not self.bare_thousand and (self.sure or not self.decimals)

    def found(self) -> Marks:
        """Return the writing with the separators that occurred."""
        return Marks(self.writing.decimal, next(iter(self.thousands), ""))
