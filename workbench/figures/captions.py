"""Captions: what each figure shows, and what a reader may and may not conclude from it."""

from __future__ import annotations

from workbench.figures.samples import FEWEST_FOR_ELLIPSE
from workbench.look.between import BetweenLook
from workbench.look.block import BlockLook
from workbench.look.words import listed, percent, short


def explained_caption(look: BlockLook) -> str:
    """Caption of the explained variance."""
    number = look.number
    crossed = number.cross_validated
    beside = (
        f"cross-validation {crossed.number}" if crossed is not None else "no cross-validation at this size"
    )
    return (
        f"Explained variance of {short(look.name)}: the {look.shares.size} components add up to all of the "
        f"variance of its features. {number.number} carry signal: {number.rule}. Beside it: parallel analysis "
        f"{number.parallel.number}, elbow {number.elbow.number}, {beside}. A component under the dashed line is no "
        "larger than chance makes it; one above it is not for that reason biology, as batches and odd samples make "
        "components too."
    )


def score_caption(look: BlockLook, first: int, second: int) -> str:
    """Caption of a score plot."""
    told = sum(float(look.shares[k - 1]) for k in (first, second) if k <= look.scores.shape[1])
    parts = [
        f"Samples of {short(look.name)} on components {first} and {second}, {percent(told)} of the variance; "
        "one unit of length on both axes. Samples that lie together are alike in what these two components show, "
        "and may differ in all else."
    ]
    if look.groups is not None:
        parts.append(
            f"Colour and line: {short(look.groups.name)}; ellipses hold the next sample of a normal group with "
            f"probability 0.95, for groups of at least {FEWEST_FOR_ELLIPSE}. That ellipses overlap does not mean that "
            "the groups are equal, nor that groups apart here differ because of the group alone."
        )
    if look.shapes is not None:
        parts.append(f"Marks: {short(look.shapes.name)}.")
    if look.flags:
        parts.append(
            "Labelled: samples to check, with the reason in samples.tsv; a label is no reason to leave one out."
        )
    return " ".join(parts)


def circle_caption(look: BlockLook) -> str:
    """Caption of the correlation circle."""
    return (
        f"Features of {short(look.name)} at their correlations with components 1 and 2. Near the rim a feature is "
        "told almost wholly by the two; there, a small angle means that features go together, opposite places that "
        "they go against each other, a right angle that they are uncorrelated. Near the centre angles mean nothing. "
        f"Dashed: radius {look.relations.guide:.2f}, which 19 of 20 random directions stay within at "
        f"{len(look.samples)} samples; {look.relations.beyond} features lie beyond it. They are not thereby "
        "significant: components are made to lie close to many features."
    )


def biplot_caption(look: BlockLook) -> str:
    """Caption of the biplot."""
    return (
        f"Samples (scores divided by their standard deviation) and leading features (arrows, correlations times the "
        f"factor given) of {short(look.name)}. A sample far along an arrow is high in that feature, as far as "
        "components 1 and 2 tell it. Lengths of arrows and distances of samples have units of their own and are not "
        "to be compared."
    )


def loadings_caption(look: BlockLook) -> str:
    """Caption of the loadings."""
    return (
        f"Features of {short(look.name)} that correlate most with each of the first components. The sign of a "
        "component is a convention (its largest loading is positive); only which features share a side has meaning. "
        "A long list lies behind these few: see loadings.tsv."
    )


def association_caption(look: BlockLook) -> str:
    """Caption of the association map."""
    untestable = [
        short(c) for c, why in zip(look.association.columns, look.association.untestable, strict=True) if why
    ]
    text = (
        f"Share of each component's variance that a column of the sample sheet explains (R2), {short(look.name)}; "
        "numbers where the false-discovery rate over the whole map is at most 0.05, a star at columns that the study "
        "adjusts for, grey component numbers past those with signal. Columns that go together (a group run on a day "
        "of its own) explain the same component, and the map cannot tell which of them did."
    )
    return text + (f" Not tested: {listed(untestable)}." if untestable else "")


def outlier_caption(look: BlockLook) -> str:
    """Caption of the map of odd samples."""
    return (
        f"Samples of {short(look.name)}: how far out within the model (Hotelling's T2) and how far from it (squared "
        "prediction error). About one good sample in a hundred passes each 99 % limit. A sample past a limit is to be "
        "looked at, not left out for that; with many more features than samples the limit of the error is generous."
    )


def gap_caption(look: BlockLook) -> str:
    """Caption of the map of gaps."""
    share = percent(look.gaps.share) if look.gaps is not None else "0 %"
    return (
        f"Missing values of {short(look.name)} as delivered ({share}). Left: missing share of each sample in bins of "
        "features from rare to abundant. Right: missing share of each feature. Gaps at low abundance point to a "
        "detection limit; gaps that follow a sample or a group whatever the abundance point to the assay."
    )


def spread_caption(look: BlockLook) -> str:
    """Caption of the distributions."""
    return (
        f"Values of each sample of {short(look.name)} before and after preparation: median, quartiles (thick) and "
        "middle 90 % (thin). After preparation medians should lie level; one that does not is a sample to check. "
        "Level medians do not show that samples are comparable feature by feature."
    )


def agreement_caption(look: BetweenLook) -> str:
    """Caption of the agreement between blocks."""
    restricted = f" Permutations: {look.restriction}." if look.restriction else ""
    return (
        "Agreement of every two blocks about the samples that both have: RV coefficient less what chance alone gives "
        f"(0 no agreement, 1 equal up to rotation), and Procrustes correlation of the leading components.{restricted} "
        "It may rest on a batch or a group that both blocks share. No agreement of whole blocks does not exclude "
        "single features that go together."
    )
