"""What a cell's text stands for: a number, a missing value, or something that a spreadsheet made of one."""

from __future__ import annotations

import re

MISSING = frozenset({"", "NA", "NaN", "nan", "N/A", "#N/A", "null", "NULL", "-", "."})
MISSING_SHOWN = "an empty cell, NA, NaN, nan, N/A, #N/A, null, NULL, - or ."

_DECIMAL_COMMA = re.compile(r"[+-]?(\d+,\d*|,\d+)([eE][+-]?\d+)?")
_THOUSANDS = re.compile(r"[+-]?\d{1,3}(,\d{3})+(\.\d*)?")
_CONTINENTAL = re.compile(r"[+-]?\d{1,3}([. '\u00a0\u202f\u2019]\d{3})+([.,]\d+)?")
_LIMIT = re.compile(r"[<>\u2264\u2265]\s*=?\s*[\w.,]+", re.UNICODE)
_UNDER = re.compile(r"[<\u2264]\s*=?\s*[\w.,]+", re.UNICODE)
_BELOW = re.compile(
    r"(b?\s*l\s*l?\s*o?\s*[dq]|n\.?\s?d\.?|below.*|not detected|und(etermined|etected)?)", re.IGNORECASE
)
_UNIT = re.compile(r"[+-]?\d+(\.\d+)?\s*(%|[a-zA-Z\u00b5\u03bc]+(/\w+)?)")
_PADDED = re.compile(r"[+-]?0\d+")
_SPREADSHEET_ERROR = re.compile(r"#(REF|DIV/0|VALUE|NAME|NUM|NULL|SPILL|CALC)[!?]?", re.IGNORECASE)


def word_set(text: str) -> frozenset[str]:
    """Return the words of a text as a set."""
    return frozenset(text.split())


def number_of(text: str) -> float | None:
    """Return the number that a text is, exactly as Python's ``float`` reads it, or None.

    Narrower than ``float``: no digits of other scripts and no ``1_000``. A missing token is not a number;
    infinities are returned as such, and refused by those who ask.

    >>> number_of("0.1") == 0.1, number_of("1_000"), number_of("NA"), number_of(" 2.5e3 ")
    (True, None, None, 2500.0)
    """
    if text in MISSING or "_" in text or not text.isascii():
        return None
    try:
        return float(text)
    except ValueError:
        return None


def hint_for(text: str) -> str:
    """Return what a text in place of a number probably is, or an empty text.

    >>> hint_for("1,5"), hint_for("<LOD"), hint_for("abc")
    ('a decimal comma', 'a value under or over a limit', '')
    """
    plain = text.strip()
    hints = (
        (_SPREADSHEET_ERROR, "a spreadsheet's error value"),
        (_THOUSANDS, "a thousands separator, or a decimal comma"),
        (_DECIMAL_COMMA, "a decimal comma"),
        (_CONTINENTAL, "a thousands separator"),
        (_LIMIT, "a value under or over a limit"),
        (_BELOW, "a value under the limit of detection, or not detected"),
        (_UNIT, "a number with a unit"),
    )
    return next((hint for pattern, hint in hints if pattern.fullmatch(plain)), "")


def is_under_limit(text: str) -> bool:
    """Return whether a text says that a value is under a limit of detection, or not detected.

    Values over a limit (``>ULOQ``) are not among them: they are missing at the other end, and counting them as
    missing would make high values look low.

    >>> [is_under_limit(t) for t in ("<LOD", "< 0.5", "n.d.", "BLQ", ">100", "NA")]
    [True, True, True, True, False, False]
    """
    plain = text.strip()
    return _UNDER.fullmatch(plain) is not None or _BELOW.fullmatch(plain) is not None


def is_padded(text: str) -> bool:
    """Return whether a text is a code with zeros at its start, such as ``007``: text, though digits alone."""
    return _PADDED.fullmatch(text.strip()) is not None


def is_comma_number(text: str) -> bool:
    """Return whether a text is a number only if commas, points or blanks in it are no plain decimal point.

    >>> is_comma_number("1,5"), is_comma_number("1.234.567"), is_comma_number("1.234")
    (True, True, False)
    """
    plain = text.strip()
    return number_of(plain) is None and any(
        p.fullmatch(plain) for p in (_DECIMAL_COMMA, _THOUSANDS, _CONTINENTAL)
    )


_WAYS_OUT = {
    "a decimal comma": "write numbers with a decimal point",
    "a thousands separator, or a decimal comma": "write numbers with a decimal point and without separators",
    "a thousands separator": "write numbers without thousands separators",
    "a value under or over a limit": "leave such cells empty (missing), or put the limit in their place",
    "a value under the limit of detection, or not detected": "leave such cells empty (missing)",
    "a number with a unit": "take the unit out of the cells",
    "a spreadsheet's error value": "mend the formula in the spreadsheet and save again",
}


def way_out_for(text: str) -> str:
    """Return the way out for a text that is no number."""
    return _WAYS_OUT.get(hint_for(text), f"a missing value is {MISSING_SHOWN}")


def missing_among(texts: frozenset[str] | set[str]) -> frozenset[str]:
    """Return the missing tokens of a column of text: all, but ``-`` is a level where ``+`` is one too.

    >>> "-" in missing_among({"+", "-"}), "-" in missing_among({"yes", "no", "-"})
    (False, True)
    """
    return MISSING - {"-"} if any(text and not text.strip("+") for text in texts) else MISSING
