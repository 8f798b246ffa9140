"""Names that are equal but for a prefix or suffix that many of them share."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass

from .name_forms import Form, WrittenName, differences

_RUNNING = "#"


@dataclass(frozen=True)
class Fit:
    """One name of each side that are equal but for an affix.

    Attributes
    ----------
    delivered, sample
        The names.
    key
        What has to be shared: the affixes and whose they are.
    rule
        In what the two differ, in words.
    alone
        Whether the affix needs no others that share it.
    """

    delivered: str
    sample: str
    key: tuple[object, ...]
    rule: str
    alone: bool = False


Pairs = dict[str, tuple[str, str]]
Several = dict[str, set[str]]


def affix_pairs(
    table: Sequence[WrittenName], sheet: Sequence[WrittenName], least: int
) -> tuple[Pairs, Several]:
    """Return candidates by affix, and names of the sheet for which there are several.

    Parameters
    ----------
    table, sheet
        Names that have not been matched.
    least
        Candidates that must share an affix.

    Returns
    -------
    dict, dict
        For a name of the sheet: the delivered name and the rule; the delivered names that fit equally.
    """
    starts = _shared_starts(sheet, least)
    ways = (_exact_affixes(table, sheet, starts), _running_affixes(table, sheet))
    found: Pairs = {}
    several: Several = defaultdict(set)
    for fits in ways:
        taken = {delivered for delivered, _ in found.values()}
        free = [
            f for f in _shared(fits, least)
            if f.sample not in found and f.sample not in several and f.delivered not in taken
        ]  # fmt: skip
        samples, delivered = _partners(free)
        for fit in free:
            if len(samples[fit.sample]) == len(delivered[fit.delivered]) == 1:
                found[fit.sample] = (fit.delivered, fit.rule)
            else:
                several[fit.sample].update(samples[fit.sample])
    return found, several


def _partners(fits: Iterable[Fit]) -> tuple[Mapping[str, set[str]], Mapping[str, set[str]]]:
    samples: dict[str, set[str]] = defaultdict(set)
    delivered: dict[str, set[str]] = defaultdict(set)
    for fit in fits:
        samples[fit.sample].add(fit.delivered)
        delivered[fit.delivered].add(fit.sample)
    return samples, delivered


def _shared(fits: Iterable[Fit], least: int) -> list[Fit]:
    """Return the fits whose affix enough names of the sheet share."""
    groups: dict[tuple[object, ...], list[Fit]] = defaultdict(list)
    for fit in fits:
        groups[fit.key].append(fit)
    return [
        fit
        for group in groups.values()
        if len({fit.sample for fit in group}) >= least or group[0].alone
        for fit in group
    ]


def _shared_starts(sheet: Sequence[WrittenName], least: int) -> frozenset[str]:
    """Return the first words that enough names of the sheet share."""
    names: dict[str, int] = defaultdict(int)
    for name in sheet:
        if len(name.parts) > 1 and name.parts[0].isalpha():
            names[name.parts[0]] += 1
    return frozenset(word for word, count in names.items() if count >= least)


def _index(names: Sequence[WrittenName]) -> dict[Form, list[WrittenName]]:
    index: dict[Form, list[WrittenName]] = defaultdict(list)
    for name in names:
        if name.parts:
            index[name.parts].append(name)
    return index


def _spans(longer: WrittenName, shorter: Mapping[Form, list[WrittenName]], most: int) -> Iterator[
    tuple[int, int, WrittenName]
]:  # fmt: skip
    """Yield where names of the other side stand inside a name, and these names."""
    n = len(longer.parts)
    for start in range(n):
        for end in range(start + 1, min(n, start + most) + 1):
            for inner in shorter.get(longer.parts[start:end], ()):
                yield start, end, inner


def _exact_affixes(
    table: Sequence[WrittenName], sheet: Sequence[WrittenName], starts: frozenset[str]
) -> Iterator[Fit]:
    samples, delivered = _index(sheet), _index(table)
    bare = _without_start(sheet, starts)
    most = max((len(form) for form in (*samples, *bare)), default=0)
    for name in table:
        for start, end, sample in _spans(name, samples, most):
            key = ("table", name.parts[:start], name.parts[end:])
            alone = key[1:] == (("x",), ()) and sample.parts[0][0].isdigit()
            yield Fit(name.name, sample.name, key, _rule(name, start, end, sample), alone)
        yield from _short_starts(name, bare, most)
    most = max(map(len, delivered), default=0)
    for sample in sheet:
        for start, end, name in _spans(sample, delivered, most):
            key = ("sheet", sample.parts[:start], sample.parts[end:])
            yield Fit(name.name, sample.name, key, _rule(sample, start, end, name, " of the sheet"))


def _without_start(sheet: Sequence[WrittenName], starts: frozenset[str]) -> dict[Form, list[WrittenName]]:
    index: dict[Form, list[WrittenName]] = defaultdict(list)
    for name in sheet:
        if name.parts and name.parts[0] in starts:
            index[name.parts[1:]].append(name)
    return index


def _short_starts(
    name: WrittenName, bare: Mapping[Form, list[WrittenName]], most: int
) -> Iterator[Fit]:  # fmt: skip
    """Yield fits of names whose first word is the other's in short, or which lacks it."""
    for start, end, sample in _spans(name, bare, most):
        word, its = name.parts[start - 1] if start else "", sample.parts[0]
        if word == its or not (word.isalpha() or not word):
            continue
        if not word or word.startswith(its) or its.startswith(word):
            told = [f"{shown_word(name, start)} for '{sample.written(0, 1)}'" if word else
                    f"prefix '{sample.before(1)}' of the sheet"]  # fmt: skip
            told += [f"prefix '{name.before(start - 1)}'"] if start > 1 else []
            told += [f"suffix '{name.behind(end)}'"] if end < len(name.parts) else []
            key = ("start", name.parts[:start], its, name.parts[end:])
            yield Fit(name.name, sample.name, key, ", ".join(told))


def shown_word(name: WrittenName, start: int) -> str:
    """Return the word before a token in quotes, as it is written."""
    return f"'{name.written(start - 1, start)}'"


def _running_affixes(table: Sequence[WrittenName], sheet: Sequence[WrittenName]) -> Iterator[Fit]:
    """Yield fits with a suffix (or prefix) that holds a number of its own in each name."""
    samples = _index([name for name in sheet if not all(part.isdigit() for part in name.parts)])
    most = max(map(len, samples), default=0)
    for name in table:
        for start, end, sample in _spans(name, samples, most):
            rest = name.parts[end:] if start == 0 else name.parts[:start] if end == len(name.parts) else ()
            if rest:
                key = ("running", start == 0, tuple(_RUNNING if part.isdigit() else part for part in rest))
                yield Fit(name.name, sample.name, key, _rule(name, start, end, sample))


def _rule(longer: WrittenName, start: int, end: int, shorter: WrittenName, of: str = "") -> str:
    told = [f"prefix '{longer.before(start)}'{of}"] if start else []
    told += [f"suffix '{longer.behind(end)}'{of}"] if end < len(longer.parts) else []
    core = longer.written(start, end)
    return ", ".join(told + (differences(core, shorter.text) if core != shorter.text else []))
