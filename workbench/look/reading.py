"""What the look at a block says in plain words: at most ten lines, every one with its numbers."""

from __future__ import annotations

import numpy as np

from workbench.look.block import ALONE, SPE, BlockLook, SampleFlag, flagged_samples
from workbench.look.relations import Pull, Relation
from workbench.look.words import listed, percent, short, small

FDR = 0.05
LEAST_R2 = 0.1
TOGETHER = 0.5
INDEPENDENT = 0.3
MOST_TOLD = 6
FLAT = 0.2


def block_reading(look: BlockLook) -> tuple[str, ...]:
    """Read one block in at most ten lines.

    What stands out, what it goes with, how many components are more than noise and by which rule, which
    samples and features to look at, where the gaps are. All of it is about this block's samples alone, and
    none of it says what causes what.
    """
    lines = (
        _size(look),
        _main_source(look),
        _further_sources(look),
        _columns(look),
        _number(look),
        _other_numbers(look),
        _samples(look),
        _together(look),
        _independent(look),
        _gaps(look),
    )
    return tuple(line for line in lines if line)


def goes_with(look: BlockLook, component: int, most: int = 2) -> str:
    """Name the columns that a component goes with, strongest first: q at most 0.05, R2 at least 0.1; "" for none.

    Parameters
    ----------
    look : BlockLook
    component : int
        From 0.
    most : int
        Columns named; the others are counted.
    """
    found = look.association
    q, strength = found.q[:, component], found.r2_adjusted[:, component]
    passing = [j for j in range(q.size) if q[j] <= FDR and found.r2[j, component] >= LEAST_R2]
    passing.sort(key=lambda j: -strength[j])
    told = [f"{short(found.columns[j])} (R2 {found.r2[j, component]:.2f}, q {small(q[j])})" for j in passing]
    return listed(told, most) if told else ""


def _size(look: BlockLook) -> str:
    text = f"{short(look.name)} ({short(look.layer)}): {len(look.samples)} samples x {len(look.features)} features"
    if look.constant:
        text += f", {len(look.constant)} of them constant and left out"
    if look.imputed_share:
        text += f"; {percent(look.imputed_share)} of the values were filled in by preparation"
    return text + "."


def _main_source(look: BlockLook) -> str:
    text = f"Main source of variation: component 1, {percent(look.shares[0])} of the total, goes with "
    told = goes_with(look, 0)
    if not told:
        told = f"no column of the sample sheet ({_nearest(look, 0)})"
    return f"{text}{told}{_caution(look, 0)}."


def _nearest(look: BlockLook, component: int) -> str:
    """Name the column that comes nearest when none passes."""
    found = look.association
    r2 = found.r2[:, component]
    if np.isnan(r2).all():
        return "none could be tested"
    j = int(np.nanargmax(found.r2_adjusted[:, component]))
    return f"nearest: {short(found.columns[j])}, R2 {r2[j]:.2f}, q {small(found.q[j, component])}"


def _caution(look: BlockLook, component: int) -> str:
    """Say so when a component is one sample, or lies mostly outside the space of the signal."""
    alone = [f for f in look.flags if f.kind == ALONE and f.component == component + 1]
    if alone:
        return f"; {percent(alone[0].value)} of it is sample {short(look.samples[alone[0].sample])} alone"
    if look.number.signal.most == 0 or look.number.shares[component] >= 0.5:
        return ""
    return "; it does not stand out of noise"


def _further_sources(look: BlockLook) -> str:
    """Tell what the other components with signal go with; those that go with nothing come together."""
    last = min(look.number.number, MOST_TOLD, look.scores.shape[1])
    if last < 2:
        return ""
    told, silent = [], []
    for k in range(1, last):
        found, size = goes_with(look, k), f"{k + 1} ({percent(look.shares[k])}{_caution(look, k)})"
        if found:
            told.append(f"component {size} goes with {found}")
        else:
            silent.append(size)
    if silent:
        plural = "component {} goes" if len(silent) == 1 else "components {} go"
        told.append(plural.format(listed(silent, MOST_TOLD)) + " with nothing that the sample sheet records")
    more = look.number.number - last
    return f"Then: {'; '.join(told)}{f'; {more} more carry signal' if more > 0 else ''}."


def _columns(look: BlockLook) -> str:
    """Tell on which component the group and the columns adjusted for show most."""
    group = (look.groups.name,) if look.groups is not None else ()
    wanted = [name for name in dict.fromkeys((*group, *look.adjust)) if name in look.association.columns]
    told = [_where(look, name) for name in wanted]
    return f"Where the design shows: {'; '.join(told)}." if told else ""


def _where(look: BlockLook, column: str) -> str:
    found = look.association
    j = found.columns.index(column)
    name = short(column) + (" (adjusted for)" if column in look.adjust else "")
    if found.untestable[j]:
        return f"{name} could not be tested, {found.untestable[j]}"
    k = int(np.nanargmax(found.r2_adjusted[j]))
    figures = f"R2 {found.r2[j, k]:.2f}, q {small(found.q[j, k])}"
    if found.q[j, k] <= FDR:
        return f"{name} most on component {k + 1} ({figures})"
    return f"{name} on none of the first {found.r2.shape[1]} components (nearest: {k + 1}, {figures})"


def _number(look: BlockLook) -> str:
    number, most = look.number.number, look.number.signal.most
    if most == 0:
        return (
            f"How many components carry signal cannot be told from {len(look.samples)} samples and "
            f"{len(look.features) - len(look.constant)} features that vary; what the figures show may be chance."
        )
    subject = {0: "No component carries", 1: "1 component carries"}.get(number, f"{number} components carry")
    text = f"{subject} signal"
    if number:
        text += f", {percent(look.cumulative[number - 1])} of the variation together"
    if number == most:
        text += f" (the most that {len(look.samples)} samples can tell; there may be more)"
    return f"{text}. Rule: {look.number.rule}."


def _other_numbers(look: BlockLook) -> str:
    found = look.number
    crossed = "not possible" if found.cross_validated is None else str(found.cross_validated.number)
    return (
        f"Other suggestions: elbow {found.elbow.number} ({found.elbow.reason}); parallel analysis "
        f"{found.parallel.number}; cross-validation {crossed}."
    )


def _samples(look: BlockLook) -> str:
    if not look.flags:
        return "Samples to check: none lies beyond a 99 % limit or makes up most of a component alone."
    told = []
    for i in flagged_samples(look.flags):
        reasons = ", ".join(flag_words(flag) for flag in look.flags if flag.sample == i)
        told.append(f"{short(look.samples[i])} ({reasons})")
    expected = 0.01 * 2 * len(look.samples)
    return (
        f"Samples to check: {listed(told)}; the two limits together let about {expected:.1f} of "
        f"{len(look.samples)} good samples pass."
    )


def flag_words(flag: SampleFlag) -> str:
    """Say why a sample is to be checked."""
    if flag.kind == ALONE:
        return f"{percent(flag.value)} of component {flag.component} alone"
    where = "far from the model, squared error" if flag.kind == SPE else "far out within the model, T2"
    return f"{where} {flag.value:.3g} over {flag.limit:.3g}"


def _together(look: BlockLook) -> str:
    """Tell which features pull together along component 1, and which against them."""
    pulls = [pull for pull in look.relations.pulls if pull.component == 1]
    if not pulls:
        return "No feature lies beyond the guide of the correlation circle along component 1."
    told = "; ".join(_pull(look, pull) for pull in pulls)
    against = [r for r in look.relations.between if r.one.component == r.other.component == 1]
    return f"Along component 1: {told}{_opposed(against[0]) if against else ''}."


def _pull(look: BlockLook, pull: Pull) -> str:
    names = listed([short(look.features[j]) for j in pull.features])
    side = "at its upper end" if pull.end == "+" else "at its lower end"
    low, middle, high = pull.within
    if np.isnan(low):
        return f"{names} {side}"
    how = "hardly go together" if middle < INDEPENDENT else "go together loosely"
    if low >= TOGETHER:
        how = "pull together"
    return f"{names} {how} {side} (correlations {low:.2f} to {high:.2f})"


def _opposed(relation: Relation) -> str:
    if relation.median <= -TOGETHER:
        return f"; the two ends pull against each other (median correlation {relation.median:.2f})"
    return f"; the two ends hardly oppose each other (median correlation {relation.median:.2f})"


def _independent(look: BlockLook) -> str:
    """Tell how the features along component 2 relate to those along component 1."""
    second = [pull for pull in look.relations.pulls if pull.component == 2]
    first = [pull for pull in look.relations.pulls if pull.component == 1]
    if not second or not first:
        return ""
    across = [r for r in look.relations.between if {r.one.component, r.other.component} == {1, 2}]
    largest = max((r.median for r in across), key=abs)
    relation = (
        "independently of those along component 1"
        if abs(largest) < INDEPENDENT
        else ("not independently of those along component 1")
    )
    told = "; ".join(_pull(look, pull) for pull in second)
    return f"Along component 2, {relation} (largest median correlation {largest:.2f}): {told}."


def _gaps(look: BlockLook) -> str:
    gaps = look.gaps
    if gaps is None:
        return ""
    if gaps.share == 0.0:
        return "No measured value is missing."
    worst = int(gaps.by_sample.argmax())
    text = (
        f"{percent(gaps.share)} of the measured values are missing, {percent(gaps.by_sample.min())} to "
        f"{percent(gaps.by_sample[worst])} per sample (most: {short(look.samples[worst])})"
    )
    if np.isnan(gaps.trend):
        return text + "."
    where = (
        "more of them in features of low abundance"
        if gaps.trend < -FLAT
        else (
            "more of them in features of high abundance"
            if gaps.trend > FLAT
            else "no matter how abundant the feature"
        )
    )
    return f"{text}, {where} (rank correlation {gaps.trend:.2f})."
