"""Ids that a spreadsheet has turned into dates or numbers, in the forms that spreadsheets write.

The damage is common: Ziemann, Eren & El-Osta 2016, Genome Biology 17:177, found it in a fifth of papers with
gene lists (``SEPT2`` to ``2-Sep``, ``2310009E13`` to ``2.31E+19``).
"""

from __future__ import annotations

import re
from collections.abc import Sequence

from .tokens import word_set

# Month abbreviations as spreadsheets show them in English, German, French, Spanish, Italian, Portuguese,
# Dutch, the Nordic languages and Russian (common practice; from memory). Of Polish and Turkish those that
# gene symbols become (September, October, December) and that are no chemical words (so not "Ara").
_MONTHS = word_set(
    "jan janv januar january januari ene gen feb febr fev fevr févr february februar mar mars march mär "
    "märz mrz mrt abr apr avr avril april mag mai maj may mei jun juin june juni giu jul juil july juli "
    "lug aug août aout august ago sep sept set september oct okt out ott october oktober nov november dec "
    "déc dez dic des december dezember septembre octobre novembre décembre septiembre octubre noviembre "
    "diciembre marzo mars maart settembre ottobre dicembre setembro outubro dezembro "
    "янв фев мар март апр апреля май июн июл авг сен сент окт ноя дек wrz paź gru eyl eki"
)
_MONTH = "(?:" + "|".join(sorted(_MONTHS, key=lambda m: (-len(m), m))) + r")\.?"
_YEAR = r"(?:\d{2}|(?:19|20)\d{2})"
_DAY = r"(?:0?[1-9]|[12]\d|3[01])"
_TIME = r"(?:[T ]\d{1,2}:\d{2}(?::\d{2}(?:\.\d+)?)?Z?)?"
_FORMS = (
    rf"{_DAY}[-/ ]{_MONTH}(?:[-/ ]{_YEAR})?{_TIME}",  # 2-Sep, 02/set, 2-Sep-24
    rf"{_DAY}\.\s?{_MONTH}(?:\s?{_YEAR})?",  # 02. Sep, 1. Mrz 2024
    rf"{_MONTH}\s{_DAY},?\s(?:19|20)\d{{2}}",  # Sep 2, 2024
    rf"{_MONTH}[-/ ]{_YEAR}",  # Sep-02, Mar-2001; not Oct-4, a protein's name
    rf"(?:19|20)\d{{2}}[-/.](?:0?[1-9]|1[0-2])[-/.]{_DAY}{_TIME}",  # 2024-09-02 00:00:00
    rf"{_DAY}[-/.]{_DAY}[-/.](?:19|20)\d{{2}}{_TIME}",  # 9/2/2024, 02.09.2024
    rf"{_DAY}/{_DAY}/\d{{2}}{_TIME}",  # 9/2/24
    rf"(?:\d{{2,4}}年)?\d{{1,2}}月{_DAY}日",
    rf"(?:\d{{2,4}}년\s?)?\d{{1,2}}월\s?{_DAY}일",
)
_DATE = re.compile("|".join(f"(?:{form})" for form in _FORMS), re.IGNORECASE)
_SERIAL = re.compile(r"[34]\d{4}(\.0)?")
_ROUNDED = re.compile(r"\d([.,]\d+)?E\+\d+")
_FEW = 0.02


def is_date(text: str) -> bool:
    """Return whether an id is a date as spreadsheets write them.

    >>> [is_date(t) for t in ("2-Sep", "Mar-01", "2024-09-02", "SEPT2", "Oct-4", "18:1/20:4")]
    [True, True, True, False, False, False]
    """
    return _DATE.fullmatch(text.strip()) is not None


def is_serial(text: str) -> bool:
    """Return whether a text may be the number of a day, counted from 1900, between 1982 and 2036.

    >>> is_serial("44075"), is_serial("440")
    (True, False)
    """
    return _SERIAL.fullmatch(text.strip()) is not None


def is_rounded(text: str) -> bool:
    """Return whether a text is a number as spreadsheets round long ones, or names such as ``2310009E13``.

    >>> is_rounded("2.31E+19"), is_rounded("2310009E13")
    (True, False)
    """
    return _ROUNDED.fullmatch(text.strip()) is not None


def suspicious_numbers(ids: Sequence[str]) -> tuple[str, ...]:
    """Return ids that may be date serial numbers or rounded ids, where hardly any id is a number.

    Five-digit numbers from 30000 to 49999 (days since 1900 from 1982 to 2036) and forms such as ``2.31E+19``,
    when such ids are at most 2 % of all: a warning, since such an id may be right.

    >>> suspicious_numbers([f"GENE{i}" for i in range(100)] + ["44075", "2.31E+19"])
    ('44075', '2.31E+19')
    """
    odd = tuple(i for i in ids if is_serial(i) or is_rounded(i))
    return odd if len(odd) <= _FEW * len(ids) else ()
