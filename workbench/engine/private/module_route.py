"""Pairs that their module carries: features of two layers that go with the same shared variation.

A component ``u`` of the first block and ``v`` of the second, each found in its own block alone, that go with each
other are two views of one shared factor. A feature ``g`` of the first block that goes with ``v`` and a feature
``m`` of the second that goes with ``u`` both follow that factor, and so go with each other. No feature is tested
against a score that its own layer entered: ``v`` was made without ``g``, and ``u`` without ``m``, so that each test
has the t law of ``n - c - 1`` degrees of freedom where the feature goes with nothing in the other layer.

The features of each block are judged by Benjamini & Hochberg over all features of that block. A pair is false only
where one of its ends is, so that of the pairs of two lists no larger a share is false than of both lists together:

    q(g, m) = 2 max(q(g, v), q(m, u)),   p(g, m) = max(p(g, v), p(m, u)).

A score of many features is nearer to the factor than one feature is, and a block has fewer features than two blocks
have pairs; hence the power. The smallest q of all couples ``(u, v)`` counts.

The argument fails where a component mixes two shared factors: features of the one would be joined to features of
the other. Three things withstand that. A pair must also go with each other as its couple implies, in sign and at
``p <= GUARD`` by its own correlation; of pairs that do not go with each other one in 40 does. And the implied pairs
of a couple tell a mixture: of pairs that do not go with each other three in four are of the other sign, or weaker than
half of what chance gives; of a pure couple's hardly any. A couple with more than ``MIXED`` such pairs is left out.
Where one component of a couple is a mixture and the other is not, the pure one of the feature's own layer tells which
features to leave out: each feature must also go with its own block's component, in sign and at ``p <= OWN``. That
is no test, since the feature is part of that component, but it can only take pairs away.

References
----------
Benjamini & Hochberg 1995, J R Stat Soc B 57:289. Berger 1982, Technometrics 24:295 (the largest of several p tests
that all of several hypotheses are false).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.multiple import benjamini_hochberg
from workbench.engine.pairs.tiles import PairTiles
from workbench.engine.pairs.unit_rows import FloatArray, IndexArray, UnitRows
from workbench.engine.tails import log_p_value, p_from_log

#: P of a pair's own correlation that is asked of every pair that a module carries.
GUARD = 0.05
#: P of a feature with its own block's component that is asked of it.
OWN = 1e-3
#: P, over all components of two blocks, at which two are taken for views of one shared factor.
COUPLE = 1e-4
#: A pair's own correlation speaks against its couple with another sign, or a larger p than this.
AGAINST = 0.5
#: Share of a couple's implied pairs that may speak against it.
MIXED = 0.02
#: Implied pairs of two blocks that are weighed at most, an equal part for each couple; of more, those of the features
#: that go with it most.
MOST_PAIRS = 4_000_000
_AT_ONCE = 1_000_000


@dataclass(frozen=True, eq=False)
class ModulePairs:
    """Pairs of two blocks that a module implies and that their own correlation does not deny.

    Attributes
    ----------
    keys : ndarray of int
        ``i q + j``, ascending, each once.
    r : ndarray
        Own correlation, damped as the screen damps it.
    log_p, q : ndarray
        Of the module's test, as the equations say.
    couples, mixed : int
        Couples of components found, and those left out as mixtures.
    """

    keys: IndexArray
    r: FloatArray
    log_p: FloatArray
    q: FloatArray
    couples: int
    mixed: int


def module_pairs(pair: PairTiles, u: FloatArray, v: FloatArray, rate: float) -> ModulePairs:
    """Pairs that modules carry at a false-discovery rate.

    Parameters
    ----------
    pair : PairTiles
        Two blocks as they are screened.
    u, v : ndarray of shape (n_samples, k) and (n_samples, l)
        Shared components of the first and of the second block, each from its own block alone; nuisance removed,
        unit length.
    rate : float
        Between 0 and 1.
    """
    r = u.T @ v
    places = np.argwhere(log_p_value(r, pair.df) + np.log(max(r.size, 1)) <= np.log(COUPLE))
    parts: list[_Implied] = []
    mixed = 0
    if len(places):
        x, y = _Side.of(pair.x, u, v, pair.df), _Side.of(pair.y, v, u, pair.df)
    for own, other in places:
        sign = float(np.sign(r[own, other]))
        ends = x.tests(own, other, sign), y.tests(other, own, sign)
        lists = _lists(ends[0].q, ends[1].q, rate / 2.0, MOST_PAIRS // len(places))
        implied = list(_implied(pair, *ends, lists, sign))
        against, number = (sum(getattr(part, name) for part in implied) for name in ("against", "number"))
        mixed += against > MIXED * number
        parts.extend(implied if against <= MIXED * number else [])
    return _merged(parts, len(places), mixed)


@dataclass(frozen=True, eq=False)
class _Tests:
    """How features of one block go with a component of the other: correlation, log p and q, each of shape (p,).

    q is 1 for a feature that does not go with its own block's component of the couple, or cannot be tested.
    """

    r: FloatArray
    log_p: FloatArray
    q: FloatArray


@dataclass(frozen=True, eq=False)
class _Side:
    """Correlations of a block's features with all its own components and with all of the other block."""

    own: FloatArray
    other: FloatArray
    testable: NDArray[np.bool_]
    df: int

    @classmethod
    def of(cls, side: UnitRows, own: FloatArray, other: FloatArray, df: int) -> _Side:
        rows = side.rows(0, side.n_features)
        return cls(rows @ own, rows @ other, side.testable, df)

    def tests(self, own: int, other: int, sign: float) -> _Tests:
        r, loading = self.other[:, other], self.own[:, own]
        log_p = log_p_value(r, self.df)
        follows = (sign * r * loading > 0.0) & (log_p_value(loading, self.df) <= np.log(OWN))
        q = benjamini_hochberg(np.where(self.testable, p_from_log(log_p), np.nan))
        return _Tests(r, log_p, np.where(follows, q, 1.0))


@dataclass(frozen=True, eq=False)
class _Implied:
    """Pairs that pass the guard, of some that a couple implies; how many it implies, and how many speak against it."""

    keys: FloatArray
    r: FloatArray
    log_p: FloatArray
    q: FloatArray
    number: int
    against: int


def _implied(
    pair: PairTiles, x: _Tests, y: _Tests, lists: tuple[IndexArray, IndexArray], sign: float
) -> Iterator[_Implied]:
    """Yield the pairs of two lists of features, implied by a couple of the given sign, some features at a time."""
    i, j = lists
    if not i.size or not j.size:
        return
    right = pair.y.rows_at(j)
    for part in np.array_split(i, -(-i.size * j.size // _AT_ONCE)):
        r = pair.x.rows_at(part) @ right.T
        as_implied = sign * np.sign(x.r[part])[:, None] * np.sign(y.r[j]) * r > 0.0
        own_log_p = log_p_value(r, pair.df)
        kept = as_implied & (own_log_p <= np.log(GUARD))
        against = int(np.count_nonzero(~as_implied | (own_log_p > np.log(AGAINST))))
        keys = part[:, None] * pair.y.n_features + j
        log_p, q = (np.maximum(a[part][:, None], b[j]) for a, b in ((x.log_p, y.log_p), (x.q, y.q)))
        yield _Implied(keys[kept], r[kept], log_p[kept], 2.0 * q[kept], r.size, against)


def _lists(x_q: FloatArray, y_q: FloatArray, level: float, most: int) -> tuple[IndexArray, IndexArray]:
    """Return the features with q at or under a level; a smaller one where they make more than ``most`` pairs."""
    while True:
        i, j = np.flatnonzero(x_q <= level), np.flatnonzero(y_q <= level)
        if i.size * j.size <= most:
            return i, j
        level /= 2.0


def _merged(parts: Sequence[_Implied], couples: int, mixed: int) -> ModulePairs:
    """Return every pair once, with its smallest q."""
    columns = [
        np.concatenate([np.empty(0), *(getattr(part, name) for part in parts)])
        for name in ("keys", "r", "log_p", "q")
    ]
    keys, r, log_p, q = (column[np.lexsort((columns[2], columns[3], columns[0]))] for column in columns)
    keys, first = np.unique(keys.astype(np.int64), return_index=True)
    return ModulePairs(keys, r[first], log_p[first], q[first], couples, mixed)
