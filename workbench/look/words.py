"""Small pieces of text: shortened names, lists, percentages, false-discovery rates."""

from __future__ import annotations

from collections.abc import Sequence

NAME_LENGTH = 28


def one_line(text: str) -> str:
    """Return a name with line breaks, tabs and other unprintable characters as spaces."""
    return "".join(c if c.isprintable() else " " for c in text).strip()


def short(name: str, length: int = NAME_LENGTH) -> str:
    """Return a name of at most ``length`` characters, cut in its middle, as ends tell names apart.

    >>> short("Phosphatidylcholine(18:1/20:4)_adduct_[M+Na]+", 20)
    'Phosphatid…t_[M+Na]+'
    """
    name = one_line(name)
    if len(name) <= length:
        return name
    head = length // 2
    return f"{name[:head].rstrip()}…{name[len(name) - (length - head - 1) :].lstrip()}"


def listed(names: Sequence[str], most: int = 4) -> str:
    """Return names as a list in words, the later ones counted.

    >>> listed(["a", "b", "c"]), listed(["a", "b", "c"], most=2)
    ('a, b and c', 'a, b and 1 more')
    """
    shown = list(names[:most])
    if len(names) > most:
        return f"{', '.join(shown)} and {len(names) - most} more"
    return " and ".join([", ".join(shown[:-1]), shown[-1]] if len(shown) > 1 else shown)


def percent(share: float) -> str:
    """Return a share in percent, one digit after the point under 10 %.

    >>> percent(0.1234), percent(0.0123), percent(0.0)
    ('12 %', '1.2 %', '0 %')
    """
    if share == 0.0 or share >= 0.0995:
        return f"{100 * share:.0f} %"
    return f"{100 * share:.1f} %"


def small(p: float) -> str:
    """Return a p or q readably: three digits, or powers of ten under 0.001.

    >>> small(0.0312), small(3.2e-9)
    ('0.031', '3e-09')
    """
    return f"{p:.0e}" if p < 0.001 else f"{p:.2g}"
