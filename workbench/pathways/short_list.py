"""followup.tsv: the pairs to look at first, ranked by evidence that is written out, a plain sentence each."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import pandas as pd

MOST_ROWS = 40
MOST_OF_FEATURE = 2
"""Rows that one feature may have: a metabolite with many partners would fill the list."""

MOST_OF_COMMUNITY = 10
KEPT = 0.75
"""Share of r that must remain when it is looked at in another way."""

STABLE = 0.8
FILLED_IN = 0.05
STRONG = 0.2
"""Share of the level of the false-discovery rate under which q is strong."""

IN_GROUPS = 0.5
MOST_GROUPS = 4
"""Groups that a sentence names; of more it tells in how many an edge holds."""

FOLLOWUP_COLUMNS = (
    *("rank", "source", "source_block", "target", "target_block", "sentence", "evidence", "speaks_for"),
    *("speaks_against", "check_first", "stands_for", "community", "r", "q", "known", "shared_sets"),
)

_CLOSER_LOOK = {
    "metabolites": "what {} is, against a standard",
    "lipids": "what {} is, against a standard",
    "microbes": "the species of {}",
    "proteins": "that the peptides of {} belong to it alone",
}


Clusters = tuple[tuple[str, str], tuple[str, str]]


@dataclass(frozen=True)
class GroupCorrelation:
    """Correlation of a pair inside one group."""

    level: str
    samples: int
    r: float


@dataclass(frozen=True, eq=False)
class Candidate:
    """An edge with all that the short list says of it.

    ``level`` is what is compared where subjects have several samples: ``visits`` (changes within subjects),
    ``subjects`` (their means), or empty.
    """

    edge: Mapping[str, Any]
    source: Mapping[str, Any]
    target: Mapping[str, Any]
    groups: tuple[GroupCorrelation, ...]
    doubts: tuple[str, ...]
    level: str = ""

    @property
    def r(self) -> float:
        """Correlation of the pair."""
        return float(self.edge["r"])

    def number(self, column: str) -> float | None:
        """Return a number of the edge; None where it is missing."""
        value = self.edge.get(column)
        return None if value is None or value == "" or pd.isna(value) else float(value)

    def text(self, column: str) -> str:
        """Return a text of the edge; empty where it is missing."""
        value = self.edge.get(column)
        return "" if value is None or pd.isna(value) else str(value)

    def remains(self, column: str) -> bool | None:
        """Return whether three quarters of r remain in another figure of it; None where there is none."""
        other = self.number(column)
        return None if other is None else other * self.r > 0.0 and abs(other) >= KEPT * abs(self.r)


def judgements(
    fdr: float, informed: bool, moduled: bool = False
) -> dict[str, Callable[[Candidate], bool | None]]:
    """Return what is asked of each edge, in words; an answer is yes, no, or cannot be told (None).

    Parameters
    ----------
    fdr : float
        Level at which edges were selected.
    informed : bool
        Whether there are sets or known links to ask.
    moduled : bool
        Whether modules carry any edge of the analysis.
    """

    def strong(one: Candidate) -> bool | None:
        q = one.number("q")
        return None if q is None else q <= STRONG * fdr

    def stable(one: Candidate) -> bool | None:
        share = one.number("stability")
        return None if share is None else share >= STABLE

    def measured(one: Candidate) -> bool | None:
        share = one.number("imputed_share")
        return None if share is None else share <= FILLED_IN or bool(one.remains("r_observed"))

    def within(one: Candidate) -> bool | None:
        return None if not one.text("basis") else one.text("basis") == "within"

    def own_test(one: Candidate) -> bool | None:
        return None if not one.text("support") else one.text("support") != "module"

    def by_module(one: Candidate) -> bool | None:
        return one.text("support") != "pair" if moduled and one.text("support") else None

    def everywhere(one: Candidate) -> bool | None:
        if not one.groups:
            return None
        return all(group.r * one.r > 0.0 and abs(group.r) >= IN_GROUPS * abs(one.r) for group in one.groups)

    def known(one: Candidate) -> bool | None:
        return bool(one.text("known") or one.text("shared_sets")) if informed else None

    return {
        f"q at most {STRONG * fdr:g}": strong,
        f"among the strongest in {100 * STABLE:.0f} % of half-samples": stable,
        "holds without any one sample": lambda one: one.remains("r_without_one"),
        "holds on ranks": lambda one: one.remains("r_spearman"),
        "holds without filled-in values": measured,
        "holds within groups": within,
        "holds in every group": everywhere,
        "passes by its own test": own_test,
        "passes by its module": by_module,
        "known link or shared set": known,
    }


_OPPOSITES = (
    ("q at most", "q above"),
    ("among the strongest in", "not among the strongest in"),
    ("holds", "does not hold"),
    ("passes by", "does not pass by"),
    ("known link or shared set", "no known link or shared set"),
)


@dataclass(frozen=True)
class Verdict:
    """What speaks for and against an edge, in words."""

    speaks_for: tuple[str, ...]
    speaks_against: tuple[str, ...]

    @property
    def share(self) -> float:
        """Share of the questions that could be answered and were answered with yes."""
        return len(self.speaks_for) / max(len(self.speaks_for) + len(self.speaks_against), 1)

    @property
    def told(self) -> str:
        """Return the share as a count."""
        return f"{len(self.speaks_for)} of {len(self.speaks_for) + len(self.speaks_against)}"


def verdict_of(one: Candidate, asked: Mapping[str, Callable[[Candidate], bool | None]]) -> Verdict:
    """Return the answers for one edge."""
    answers = {words: answer(one) for words, answer in asked.items()}
    return Verdict(
        tuple(words for words, yes in answers.items() if yes is True),
        tuple(_not(words) for words, yes in answers.items() if yes is False),
    )


def _not(words: str) -> str:
    """Return the opposite of what is asked, in words.

    >>> _not("holds on ranks"), _not("q at most 0.01")
    ('does not hold on ranks', 'q above 0.01')
    """
    for asked, denied in _OPPOSITES:
        if words.startswith(asked):
            return f"{denied}{words.removeprefix(asked)}"
    return f"not: {words}"


def short_list(candidates: Sequence[Candidate], *, fdr: float, informed: bool) -> pd.DataFrame:
    """Return followup.tsv: the pairs to look at first.

    Ranked by the share of the questions of :func:`judgements` that speak for the edge, then by q, then by ``|r|``. Of
    edges between the same two clusters of near-duplicates the first one stands for all; a feature has two rows at most,
    a community ten, and the list forty, so that it holds the breadth of a network and not one hub of it.
    """
    moduled = any(one.text("support") in ("module", "both") for one in candidates)
    asked = judgements(fdr, informed, moduled)
    judged = [(one, verdict_of(one, asked)) for one in candidates]
    judged.sort(key=lambda pair: _order(*pair))
    chosen, copies = _chosen(judged)
    rows = [
        _row(rank, one, verdict, copies[_clusters(one)] - 1)
        for rank, (one, verdict) in enumerate(chosen, start=1)
    ]
    return pd.DataFrame(rows, columns=pd.Index(FOLLOWUP_COLUMNS, dtype=object))


def _order(one: Candidate, verdict: Verdict) -> tuple[Any, ...]:
    q = one.number("q")
    names = tuple(str(one.edge[column]) for column in ("source_block", "source", "target_block", "target"))
    return (-verdict.share, 1.0 if q is None else q, -abs(one.r), names)


def _chosen(
    judged: Sequence[tuple[Candidate, Verdict]],
) -> tuple[list[tuple[Candidate, Verdict]], Counter[Clusters]]:
    """Return the rows of the list, and the number of edges between each two clusters."""
    copies: Counter[Clusters] = Counter(_clusters(one) for one, _ in judged)
    taken: set[Clusters] = set()
    features: Counter[tuple[str, str]] = Counter()
    communities: Counter[str] = Counter()
    chosen: list[tuple[Candidate, Verdict]] = []
    for one, verdict in judged:
        ends, community = _clusters(one), one.text("community")
        full = any(features[end] >= MOST_OF_FEATURE for end in ends)
        full = full or bool(community and communities[community] >= MOST_OF_COMMUNITY)
        if full or ends in taken or len(chosen) == MOST_ROWS:
            continue
        taken.add(ends)
        features.update(ends)
        communities[community] += 1
        chosen.append((one, verdict))
    return chosen, copies


def _ends(one: Candidate) -> tuple[tuple[str, str], tuple[str, str]]:
    edge = one.edge
    return (str(edge["source_block"]), str(edge["source"])), (str(edge["target_block"]), str(edge["target"]))


def _clusters(one: Candidate) -> tuple[tuple[str, str], tuple[str, str]]:
    """Return what the two ends stand for: their clusters of near-duplicates, themselves without one."""
    first, second = _ends(one)
    return _cluster(one.source, first), _cluster(one.target, second)


def _cluster(feature: Mapping[str, Any], key: tuple[str, str]) -> tuple[str, str]:
    cluster = feature.get("cluster")
    if cluster is None or cluster == "" or pd.isna(cluster):
        return key
    return f"cluster in {key[0]}", str(cluster)


def _row(rank: int, one: Candidate, verdict: Verdict, copies: int) -> dict[str, Any]:
    edge = one.edge
    return {
        "rank": rank,
        **{column: edge[column] for column in ("source", "source_block", "target", "target_block")},
        "sentence": sentence(one),
        "evidence": verdict.told,
        "speaks_for": "; ".join(verdict.speaks_for),
        "speaks_against": "; ".join(verdict.speaks_against),
        "check_first": "; ".join(check_first(one)),
        "stands_for": f"{copies} more edge{'s' * (copies != 1)} between near-duplicates" if copies else "",
        "community": edge.get("community"),
        "r": one.r,
        "q": one.number("q"),
        "known": one.text("known"),
        "shared_sets": one.text("shared_sets"),
    }


def sentence(one: Candidate) -> str:
    """Return one plain sentence about an edge: what goes with what, where, and how well it withstands."""
    first, second = (_name(feature) for feature in (one.source, one.target))
    verb = "rises with" if one.r > 0 else "falls when"
    rest = second if one.r > 0 else f"{second} rises"
    interval = ""
    low, high = one.number("r_low"), one.number("r_high")
    if low is not None and high is not None:
        interval = f", {low:.2f} to {high:.2f}"
    parts = [
        f"{first} {verb} {rest} (r = {one.r:.2f}{interval}{_over(one)}){_in_groups(one)}",
        *_withstands(one),
    ]
    return f"{'; '.join(parts)}."


def _over(one: Candidate) -> str:
    """Return what an edge was tested on: samples, changes within subjects, or subjects' means."""
    samples, changes, subjects = (one.number(column) for column in ("n", "changes", "subjects"))
    if samples is None:
        return ""
    if changes is not None:
        return f" over {changes:.0f} changes within subjects ({samples:.0f} samples)"
    if subjects is not None:
        return f" over the means of {subjects:.0f} subjects ({samples:.0f} samples)"
    return f" over {samples:.0f} samples"


def _name(feature: Mapping[str, Any]) -> str:
    """Return a feature as a reader knows it: its label, its own name beside it, its layer."""
    own, label = str(feature["feature"]), str(feature.get("label") or feature["feature"])
    layer = str(feature.get("layer", feature["block"]))
    return f"{label} ({layer})" if label == own else f"{label} ({own}, {layer})"


def _in_groups(one: Candidate) -> str:
    """Return where an edge holds, in words."""
    if not one.groups:
        return ""
    holds = [group for group in one.groups if group.r * one.r > 0 and abs(group.r) >= IN_GROUPS * abs(one.r)]
    if len(one.groups) > MOST_GROUPS:
        return f", in {len(holds)} of {len(one.groups)} groups"
    if len(holds) == len(one.groups):
        names = " and ".join(filter(None, [", ".join(g.level for g in holds[:-1]), holds[-1].level]))
        return f", in {names} alike" if len(holds) > 1 else ""
    figures = ", ".join(f"{group.r:.2f} in {group.level}" for group in one.groups)
    return f", not alike in the groups ({figures})"


def _withstands(one: Candidate) -> Iterator[str]:
    """Yield how an edge looks when it is looked at in other ways."""
    alone = one.number("r_without_one")
    if alone is not None:
        holds = bool(one.remains("r_without_one"))
        unit = "subject" if one.level else "sample"
        yield f"{'holds' if holds else 'does not hold'} without any one {unit} ({alone:.2f} at the weakest)"
    ranks = one.number("r_spearman")
    if ranks is not None and not one.remains("r_spearman"):
        yield f"weak on ranks ({ranks:.2f})"
    share = one.number("imputed_share")
    if share is not None:
        yield f"{share:.0%} imputed".replace("%", " %")
    stability = one.number("stability")
    if stability is not None:
        yield f"among the strongest pairs in {100 * stability:.0f} % of half-samples"
    if one.text("support") == "module":
        yield "carried by its module, not by its own test"
    if one.text("known"):
        yield f"a known link ({one.text('known')})"
    if one.text("shared_sets"):
        yield f"both in {one.text('shared_sets')}"


def check_first(one: Candidate) -> list[str]:
    """Return what to check before money is spent on an edge: its doubts first, then what its layers call for."""
    found = list(one.doubts)
    if one.groups and judgements(1.0, False)["holds in every group"](one) is False:
        weakest = min(one.groups, key=lambda group: group.r * one.r)
        found.append(
            f"it is weaker or reversed in {weakest.level} ({weakest.r:.2f} on {weakest.samples} samples): does the "
            "question need it there?"
        )
    for feature in (one.source, one.target):
        told = _CLOSER_LOOK.get(str(feature.get("layer")))
        if told:
            found.append(told.format(feature.get("label") or feature["feature"]))
        if str(feature.get("cluster") or "") not in ("", "nan"):
            found.append(
                f"which of its near-duplicates is meant by {feature.get('label') or feature['feature']}"
            )
    return [*found, "the scatter (workbench show), then a targeted assay on new samples"]
