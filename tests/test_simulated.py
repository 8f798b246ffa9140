"""The simulated studies are what they say: every effect that is asked for can be found in the delivered tables."""

from __future__ import annotations

import math
import time
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy import stats
from simulated import (
    Block,
    Design,
    by_hand,
    clinical,
    correlations,
    design_matrix,
    logs,
    metabolites,
    microbes,
    oracle,
    proteins,
    score,
    simulate,
    transcripts,
)

PLAIN = Block("plain", "plain", "continuous", 200, dilution=0.0)
TWO = ("transcripts", "metabolites")


def small(**changes: object) -> tuple[Block, Block]:
    """Return the two blocks of the reference family at a tenth of its size."""
    return transcripts(features=300, module_size=10, **changes), metabolites(
        features=80, module_size=6, **changes
    )


def standardised(table: pd.DataFrame) -> np.ndarray:
    """Return the table's columns with mean 0 and standard deviation 1, NaN without variance."""
    x = table.to_numpy(dtype=float)
    spread = x.std(axis=0)
    return (x - x.mean(axis=0)) / np.where(spread > 1e-9, spread, np.nan)


def test_one_seed_gives_one_study() -> None:
    """The same seed gives equal tables, another seed other ones."""
    design = Design(n=24, blocks=small(), modules=2)
    first, again, other = simulate(design, 5), simulate(design, 5), simulate(design, 6)
    for name in TWO:
        pd.testing.assert_frame_equal(first.blocks[name], again.blocks[name])
        assert not first.aligned(name).equals(other.aligned(name))
    pd.testing.assert_frame_equal(first.samples, again.samples)
    np.testing.assert_array_equal(first.truth.pairs[TWO], again.truth.pairs[TWO])


def test_a_change_of_one_block_leaves_the_other_as_it_was() -> None:
    """Each part is drawn from its own stream."""
    design = Design(n=24, blocks=small(), modules=2)
    changed = simulate(design.with_block("metabolites", gaps=0.3, tails=3.0), 5)
    pd.testing.assert_frame_equal(changed.blocks["transcripts"], simulate(design, 5).blocks["transcripts"])


def test_true_pairs_are_the_features_of_one_module() -> None:
    """Four modules of 60 and 12 features make 2,880 pairs, whose loadings are on the same module."""
    truth = simulate(Design(n=12), 1).truth
    pairs = truth.pairs[TWO]
    assert pairs.shape == (4 * 60 * 12, 2)
    assert len(np.unique(pairs, axis=0)) == len(pairs)
    both = truth.loadings["transcripts"][pairs[:, 0]] * truth.loadings["metabolites"][pairs[:, 1]]
    assert ((both != 0).sum(axis=1) == 1).all()
    np.testing.assert_array_equal((truth.modules["metabolites"] >= 0).sum(), 48)


def test_features_of_two_modules_are_paired_with_both() -> None:
    """Three modules of 10 and 6 features, of which 4 and 2 follow the next module too."""
    blocks = (
        transcripts(features=300, module_size=10, overlap=4),
        metabolites(features=80, module_size=6, overlap=2),
    )
    truth = simulate(Design(n=12, blocks=blocks, modules=3), 1).truth
    first, second = ((truth.loadings[name] != 0).astype(int) for name in TWO)
    np.testing.assert_array_equal(first.sum(axis=0), [14, 14, 14])
    np.testing.assert_array_equal(np.bincount(second.sum(axis=1)), [62, 12, 6])
    np.testing.assert_array_equal(truth.pairs[TWO], np.argwhere(first @ second.T > 0))


def test_a_nested_factor_reaches_the_features_of_its_module_alone() -> None:
    """Against the same study without it: the other features hardly change, and the other block not at all."""
    design = Design(n=40, blocks=small(), modules=2)
    plain, nested = simulate(design, 5), simulate(design.with_block("metabolites", nested=1.0), 5)
    pd.testing.assert_frame_equal(nested.blocks["transcripts"], plain.blocks["transcripts"])
    one, other = (np.log(study.aligned("metabolites")) for study in (plain, nested))
    change = (other - one).to_numpy()
    inside = plain.truth.modules["metabolites"] >= 0
    # Intensities hold their measurement noise and rounding besides, and gaps.
    assert np.nanstd(change[:, inside]) > 5 * np.nanstd(change[:, ~inside])


def test_realised_correlation_is_the_stated_one() -> None:
    """Without anything else, a pair correlates by a b / sqrt((a^2 + 1)(b^2 + 1)), sign included."""
    one = Block("one", "one", "continuous", 40, module_size=20, dilution=0.0)
    other = Block("other", "other", "continuous", 40, module_size=20, dilution=0.0)
    study = simulate(Design(n=300, blocks=(one, other), modules=1, run_days=1), 3)
    a, b = (study.truth.loadings[name][:, 0] for name in ("one", "other"))
    expected = np.outer(a, b) / np.sqrt(np.outer(a**2 + 1, b**2 + 1))
    found = standardised(study.aligned("one")).T @ standardised(study.aligned("other")) / 300
    assert np.abs(expected).max() > 0.5
    assert math.sqrt(np.mean((found - expected) ** 2)) < 1.2 / math.sqrt(300)


def test_loadings_are_around_the_strength() -> None:
    """Mean magnitude is the strength, both signs occur."""
    loadings = simulate(Design(n=12, strength=1.4), 2).truth.loadings["transcripts"]
    inside = loadings[loadings != 0]
    np.testing.assert_allclose(np.abs(inside).mean(), 1.4, rtol=0.05)
    assert 0.3 < (inside > 0).mean() < 0.7


def test_dispersion_falls_with_the_mean_to_a_floor() -> None:
    """Counts have variance mean + dispersion mean^2: over-dispersed throughout, most where counts are low."""
    block = transcripts(features=800, module_size=0, private_factors=0, dilution=0.0, silent=0.0)
    counts = simulate(Design(n=300, blocks=(block,), run_days=1), 4).aligned("transcripts")
    counts = counts.div(counts.sum(axis=1), axis=0) * counts.sum(axis=1).mean()
    mean, variance = counts.mean(), counts.var()
    dispersion, trend = (variance - mean) / mean**2, mean.between(3, 200)
    assert stats.spearmanr(mean[trend], dispersion[trend]).statistic < -0.4
    assert 0.09 < dispersion[mean > 1000].median() < 0.25
    assert dispersion[mean < 20].median() > 1.5 * dispersion[mean > 1000].median()


def test_counts_look_like_sequencing() -> None:
    """Whole numbers, libraries of millions that vary two-fold and more, zeros where a feature is silent."""
    counts = simulate(Design(), 1).blocks["transcripts"].to_numpy()
    sizes = counts.sum(axis=1)
    assert counts.dtype.kind == "i"
    assert counts.min() == 0
    assert 5e6 < np.median(sizes) < 8e7
    assert sizes.max() / sizes.min() > 2
    assert 0.05 < (counts == 0).mean() < 0.2


def test_gaps_fall_with_abundance() -> None:
    """The share of missing intensities is as asked, and falls from weak to strong features."""
    design = Design(n=120, blocks=(metabolites(gaps=0.15),))
    table = simulate(design, 1).blocks["metabolites"]
    missing, abundance = table.isna().mean(), table.median()
    assert abs(table.isna().to_numpy().mean() - 0.15) < 0.02
    assert stats.spearmanr(abundance, missing, nan_policy="omit").statistic < -0.5
    strong = abundance.nlargest(60).index
    assert 0.005 < missing[strong].mean() < 0.06


def test_gaps_of_continuous_values_come_by_chance() -> None:
    """Without a detection limit, weak features have no more gaps than strong ones."""
    block = Block("plain", "plain", "continuous", 400, gaps=0.1)
    table = simulate(Design(n=100, blocks=(block,)), 1).blocks["plain"]
    assert abs(stats.spearmanr(table.median(), table.isna().mean()).statistic) < 0.15


def test_dilution_scales_whole_samples() -> None:
    """Dilution is what a sample's features have in common."""
    quiet, diluted = (metabolites(gaps=0.0, private_factors=0, module_size=0, dilution=d) for d in (0.0, 0.5))
    spread = [
        np.log(simulate(Design(n=60, blocks=(block,)), 1).aligned("metabolites")).median(axis=1).std()
        for block in (quiet, diluted)
    ]
    assert spread[0] < 0.15
    assert 0.35 < spread[1] < 0.65


def test_drift_follows_the_run_order() -> None:
    """Intensities fall over the run, and the order is a column of the sample sheet."""
    block = metabolites(drift=1.0, gaps=0.0, dilution=0.0, private_factors=0, module_size=0)
    study = simulate(Design(n=60, blocks=(block,), run_days=1), 1)
    order = study.samples["metabolites_order"]
    assert sorted(order) == list(range(1, 61))
    level = np.log(study.aligned("metabolites")).mean(axis=1)
    assert np.corrcoef(order, level)[0, 1] < -0.9


def test_compositions_compete_for_one_total() -> None:
    """Microbes are sparse and closed: a sample's total does not follow its features; proportions add up to 1."""
    closed = simulate(Design(n=60, blocks=(microbes(),)), 1).blocks["microbes"]
    assert 0.2 < (closed.to_numpy() == 0).mean() < 0.6
    assert np.log(closed.sum(axis=1)).std() < 0.45
    shares = simulate(Design(n=20, blocks=(microbes(values="proportions"),)), 1).blocks["microbes"]
    np.testing.assert_allclose(shares.sum(axis=1), 1.0, rtol=1e-12)


def test_clinical_readings_are_numbers_and_text() -> None:
    """Half of the columns are numbers, the others words, both with gaps."""
    table = simulate(Design(n=80, blocks=(clinical(),)), 1).blocks["clinical"]
    words = table.select_dtypes(object)
    assert words.shape[1] == table.shape[1] // 2
    assert set(words.stack()) == {"yes", "no", "low", "mid", "high"}
    assert 0.01 < table.isna().to_numpy().mean() < 0.06


def test_heavy_tails_are_heavy() -> None:
    """Three degrees of freedom give the kurtosis that Gaussian noise does not have."""
    designs = [Design(n=200, blocks=(replace(PLAIN, tails=tails),), run_days=1) for tails in (math.inf, 3.0)]
    gaussian, heavy = (
        np.median(stats.kurtosis(simulate(design, 1).blocks["plain"], axis=0)) for design in designs
    )
    assert abs(gaussian) < 0.3
    assert heavy > 2


def test_private_factors_are_strong_and_private() -> None:
    """A block's private factors explain a third of it, and of the other block no more than chance does."""
    study = simulate(Design(n=120, modules=0), 1)
    values = {block.name: standardised(logs(study, block)) for block in study.design.blocks}
    for own, other in (TWO, TWO[::-1]):
        scores = study.truth.private[own]
        basis = np.linalg.qr(scores - scores.mean())[0]
        explained = {name: np.nanmean(np.sum((basis.T @ x) ** 2, axis=0)) / 120 for name, x in values.items()}
        assert explained[own] > 0.3
        assert explained[other] < 2.5 * scores.shape[1] / 119


@pytest.mark.parametrize("hit", [(0.0, 0.0), (2.0, 0.0), (2.0, 2.0)])
def test_group_effects_are_where_they_are_said_to_be(hit: tuple[float, float]) -> None:
    """On one layer, on both, on none: the features that differ are those of the truth, sign included."""
    blocks = tuple(
        Block(name, name, "continuous", 60, group_effect=effect, dilution=0.0)
        for name, effect in zip("ab", hit, strict=True)
    )
    study = simulate(Design(n=100, blocks=blocks, modules=0, run_days=1), 7)
    treated = study.samples["group"] == "treated"
    for block in blocks:
        table, effects = study.aligned(block.name), study.truth.group_effects[block.name][:, 0]
        t = stats.ttest_ind(table[treated], table[~treated])
        assert (effects != 0).sum() == pytest.approx(0.2 * 60 * (block.group_effect > 0), abs=9)
        np.testing.assert_array_equal(t.pvalue[effects != 0] < 1e-6, True)
        np.testing.assert_array_equal(np.sign(t.statistic)[effects != 0], np.sign(effects[effects != 0]))
        assert (t.pvalue[effects == 0] < 0.05).mean() < 0.2


def test_crossed_run_days_are_balanced_over_the_groups() -> None:
    """Every day has every group, equally often give or take one."""
    samples = simulate(Design(n=96, blocks=(PLAIN,)), 1).samples
    table = pd.crosstab(samples["group"], samples["run_day"])
    assert table.shape == (2, 3)
    assert table.to_numpy().max() - table.to_numpy().min() <= 1


def test_a_tangled_design_is_tangled() -> None:
    """Completely tangled, the days tell the group and it adds no rank to the design; by half, they do not."""
    ranks, associations = [], []
    for tangle in (0.0, 0.7, 1.0):
        samples = simulate(Design(n=96, blocks=(PLAIN,), tangle=tangle), 1).samples
        ranks.append(design_matrix(samples, "plain").shape[1])
        associations.append(stats.contingency.association(pd.crosstab(samples["group"], samples["run_day"])))
    assert ranks == [4, 4, 3]
    assert associations[0] < 0.1 < 0.4 < associations[1] < 0.95
    assert associations[2] == pytest.approx(1.0)


def test_run_days_shift_features_of_both_blocks() -> None:
    """A study's run days are common to its blocks; one of an assay's own is a column of its name."""
    own = simulate(Design(n=60, blocks=(transcripts(days=2), metabolites())), 1)
    assert own.samples["transcripts_day"].nunique() == 2
    assert own.samples["run_day"].nunique() == 3
    study = simulate(Design(n=96, blocks=(PLAIN,), day_effect=1.0), 1)
    days = [group.index for _, group in study.samples.groupby("run_day")]
    table = study.aligned("plain")
    p = stats.f_oneway(*(table.loc[day] for day in days)).pvalue
    assert (p < 0.001).mean() > 0.8


def test_visits_correlate_within_subjects() -> None:
    """Two visits t apart have the correlation s + (1 - s) rho^t."""
    design = Design(n=300, blocks=(PLAIN,), visits=3, subject_share=0.3, autocorrelation=0.5, run_days=1)
    study = simulate(design, 1)
    assert study.samples["subject"].value_counts().eq(3).all()
    visits = standardised(study.aligned("plain")).reshape(100, 3, 200)
    for lag, other in ((1, 1), (2, 2)):
        r = np.mean(visits[:, 0] * visits[:, other])
        assert r == pytest.approx(0.3 + 0.7 * 0.5**lag, abs=0.05)


def test_counts_keep_their_noise_along_subjects() -> None:
    """Log counts of two visits of a subject correlate as the design says, less what counting adds."""
    block = transcripts(features=300, module_size=0, private_factors=0, silent=0.0)
    design = Design(n=200, blocks=(block,), visits=2, subject_share=0.8, run_days=1)
    values = standardised(logs(simulate(design, 1), block)).reshape(100, 2, 300)
    assert 0.45 < np.nanmean(values[:, 0] * values[:, 1]) < 0.75


def test_a_common_trend_moves_all_subjects() -> None:
    """In a time course with a trend, the visit explains the layers, and ties them where it is not removed."""
    design = Design(n=60, blocks=(PLAIN,), visits=6, trend=1.5, run_days=1)
    study = simulate(design, 1)
    r = standardised(study.aligned("plain")).T @ stats.zscore(study.samples["visit"]) / 60
    assert np.mean(np.abs(r)) > 0.5
    assert (r > 0.3).any()
    assert (r < -0.3).any()


def test_pairs_have_both_groups_in_each_subject() -> None:
    """Dealt by visit, the group is crossed with the subject."""
    samples = simulate(Design(n=24, blocks=(PLAIN,), visits=2, group_by="visit"), 1).samples
    assert (samples.groupby("subject")["group"].nunique() == 2).all()
    by_subject = simulate(Design(n=24, blocks=(PLAIN,), visits=2), 1).samples
    assert (by_subject.groupby("subject")["group"].nunique() == 1).all()


def test_swapped_rows_are_exchanged() -> None:
    """A pair and a cycle of three: each name's row is the next one's, every other row is as it was."""
    design = Design(n=24, blocks=small(), modules=2)
    clean = simulate(design, 3).aligned("metabolites")
    study = simulate(design.with_block("metabolites", swaps=(2, 3)), 3)
    swapped, cycles = study.aligned("metabolites"), study.truth.swaps["metabolites"]
    assert [len(cycle) for cycle in cycles] == [2, 3]
    for cycle in cycles:
        for name, owner in zip(cycle, cycle[1:] + cycle[:1], strict=True):
            pd.testing.assert_series_equal(swapped.loc[name], clean.loc[owner], check_names=False)
            assert not swapped.loc[name].equals(clean.loc[name])
    others = clean.index.difference([name for cycle in cycles for name in cycle])
    pd.testing.assert_frame_equal(swapped.loc[others], clean.loc[others])


def test_lacking_samples_are_not_in_the_table() -> None:
    """A block lacks the samples that the truth names; the common samples are the others, in sheet order."""
    design = Design(n=24, blocks=small(), modules=2)
    study = simulate(design.with_block("transcripts", lacking=3).with_block("metabolites", lacking=2), 3)
    for name, count in zip(TWO, (3, 2), strict=True):
        assert len(study.truth.lacking[name]) == count
        assert set(study.blocks[name].index) == set(study.samples.index) - set(study.truth.lacking[name])
    common = study.common_samples(*TWO)
    assert list(common) == sorted(set(study.samples.index) - set(sum(study.truth.lacking.values(), ())))


def test_odd_samples_stand_out() -> None:
    """Odd rows are the farthest from the centre; those of the whole study are odd in every block."""
    one, other = (Block(name, name, "continuous", 100, odd=1) for name in "ab")
    study = simulate(Design(n=40, blocks=(one, other), odd=2, run_days=1), 2)
    for name in "ab":
        distance = np.sum(standardised(study.aligned(name)) ** 2, axis=1)
        farthest = study.samples.index[np.argsort(-distance)[:3]]
        assert set(farthest) == set(study.truth.odd[name])
    assert len(set(study.truth.odd["a"]) & set(study.truth.odd["b"])) >= 2


@pytest.mark.parametrize("block", [transcripts, metabolites], ids=["counts", "intensities"])
def test_near_copies_nearly_equal_their_originals(block: object) -> None:
    """A copy correlates with its original far above any other feature, and shares its module."""
    design = Design(n=60, blocks=(block(features=500, module_size=12, duplicates=30, silent=0.0, gaps=0.0),))
    study = simulate(design, 1)
    name = design.blocks[0].name
    x, copies = standardised(logs(study, design.blocks[0])), study.truth.copies[name]
    assert copies.shape == (30, 2)
    assert np.median(np.mean(x[:, copies[:, 0]] * x[:, copies[:, 1]], axis=0)) > 0.97
    modules = study.truth.modules[name]
    np.testing.assert_array_equal(modules[copies[:, 0]], modules[copies[:, 1]])


def test_three_and_four_layers_share_the_modules() -> None:
    """Every two blocks of different layers have true pairs; two blocks of one layer have none."""
    blocks = (*small(), proteins(), clinical(), metabolites(name="negative", features=80, module_size=6))
    study = simulate(Design(n=30, blocks=blocks, modules=2), 1)
    assert len(study.truth.pairs) == 9
    assert ("metabolites", "negative") not in study.truth.pairs
    assert all(len(pairs) for pairs in study.truth.pairs.values())


def test_written_tables_read_back_the_same(tmp_path) -> None:
    """A .tsv has features in rows, a .csv samples in rows, in an order that is not the sheet's."""
    study = simulate(Design(n=24, blocks=(*small(), clinical()), modules=2), 1)
    files = study.write(tmp_path)
    assert sorted(path.name for path in files.values()) == [
        "clinical.csv",
        "counts.tsv",
        "metabolites.csv",
        "samples.tsv",
    ]
    counts = pd.read_csv(files["transcripts"], sep="\t", index_col=0)
    pd.testing.assert_frame_equal(counts.T, study.blocks["transcripts"], check_names=False, check_dtype=False)
    for name in ("metabolites", "clinical"):
        table = pd.read_csv(files[name], index_col=0, float_precision="round_trip")
        pd.testing.assert_frame_equal(table, study.blocks[name], check_dtype=False)
        assert list(table.index) != list(study.samples.index)
    assert list(pd.read_csv(files["samples"], sep="\t")["sample"]) == list(study.samples.index)


def test_true_pairs_correlate_in_the_view_of_the_oracle() -> None:
    """With the private factors removed, true pairs correlate more than without, and the others do not."""
    study = simulate(Design(n=96), 1)
    pairs = study.truth.pairs[TWO]
    loadings = study.truth.loadings
    sign = np.sign(
        np.sum(loadings["transcripts"][pairs[:, 0]] * loadings["metabolites"][pairs[:, 1]], axis=1)
    )
    plain, known = (correlations(study, TWO, private=private)[0] for private in (False, True))
    assert np.nanmedian(sign * known[tuple(pairs.T)]) > 0.4
    assert np.nanmedian(sign * known[tuple(pairs.T)]) > np.nanmedian(sign * plain[tuple(pairs.T)]) + 0.05
    outside = np.ones_like(known, dtype=bool)
    outside[tuple(pairs.T)] = False
    assert abs(np.nanmean(known[outside])) < 0.01
    assert np.nanstd(known[outside]) == pytest.approx(1 / math.sqrt(96), rel=0.15)


REFERENCE = {
    (96, 1.0): ((0.08, 0.15), (0.60, 0.72)),
    (96, 1.4): ((0.62, 0.73), (0.95, 1.00)),
    (48, 1.4): ((0.09, 0.22), (0.37, 0.60)),
}
"""Bands for the mean recall over five seeds: by hand, oracle."""


@pytest.mark.parametrize(("n", "strength"), REFERENCE)
def test_reference_family_is_as_hard_as_stated(n: int, strength: float) -> None:
    """Mean recall over five seeds lies in its band; false discoveries are near the nominal 5 %."""
    scores = []
    for seed in range(5):
        study = simulate(Design(n=n, strength=strength), seed)
        scores.append((score(by_hand(study), study.truth), score(oracle(study), study.truth)))
    hand, known = np.mean(scores, axis=0)
    for (low, high), (recall, _) in zip(REFERENCE[n, strength], (hand, known), strict=True):
        assert low <= recall <= high
    assert hand[1] < 0.10
    assert 0.03 < known[1] < 0.08


def test_null_studies_have_hardly_an_edge_by_hand() -> None:
    """Nothing shared: at a rate of 5 %, more than 3 of 20 studies with an edge have a chance of 0.016."""
    null = [simulate(Design(n=48, modules=0), seed) for seed in range(20)]
    assert all(len(study.truth.pairs[TWO]) == 0 for study in null)
    assert sum(len(by_hand(study)[TWO]) > 0 for study in null) <= 3


def test_a_trend_left_in_makes_false_edges() -> None:
    """The yardstick removes the visit: without that, a common trend alone correlates the layers."""
    study = simulate(Design(n=60, blocks=small(), modules=0, visits=6, trend=1.5), 1)
    assert len(by_hand(study)[TWO]) == 0
    x, y = (standardised(logs(study, block)) for block in study.design.blocks)
    assert np.mean(np.abs(np.nan_to_num(x).T @ np.nan_to_num(y) / 60) > 0.5) > 0.05


def test_score_counts_pairs() -> None:
    """Half of the true pairs and as many false ones: recall 0.5, proportion 0.5; nothing selected: 0 and 0."""
    study = simulate(Design(n=12, blocks=small(), modules=1), 1)
    true = study.truth.pairs[TWO]
    half = true[: len(true) // 2]
    wrong = np.column_stack(
        [half[:, 0], np.full(len(half), np.flatnonzero(study.truth.modules[TWO[1]] < 0)[0])]
    )
    wrong = np.unique(wrong, axis=0)
    result = score({TWO: np.vstack([half, wrong])}, study.truth)
    assert result.recall == pytest.approx(0.5)
    assert result.false_discoveries == pytest.approx(len(wrong) / (len(half) + len(wrong)))
    assert score({TWO: np.empty((0, 2), dtype=int)}, study.truth) == (0.0, 0.0)
    assert math.isnan(score({}, simulate(Design(n=12, blocks=small(), modules=0), 1).truth).recall)


def test_positions_find_named_features() -> None:
    """Names come back as columns; an unknown one is refused with its name."""
    study = simulate(Design(n=12, blocks=small(), modules=1), 1)
    np.testing.assert_array_equal(study.positions("metabolites", ["meta00003", "meta00001"]), [2, 0])
    with pytest.raises(KeyError, match="block 'metabolites' has no feature 'tran00001'"):
        study.positions("metabolites", ["meta00003", "tran00001"])


def test_impossible_designs_are_refused() -> None:
    """What has no room is said before anything is drawn."""
    with pytest.raises(ValueError, match="n = 25 samples cannot be dealt to subjects of 2 visits"):
        Design(n=25, visits=2)
    with pytest.raises(ValueError, match="100 features have no room for its modules"):
        Design(blocks=(transcripts(features=100),))
    with pytest.raises(ValueError, match="more swapped, odd and lacking samples than n = 12"):
        Design(n=12, blocks=(PLAIN,)).with_block("plain", swaps=(2, 3), lacking=8)
    with pytest.raises(ValueError, match="values 'count'; allowed: counts"):
        Design(blocks=(transcripts(values="count"),))


def test_a_study_is_made_in_under_two_seconds() -> None:
    """3,000 and 250 features of 96 samples; processor time, so that a busy machine does not count."""
    start = time.process_time()
    simulate(Design(n=96), 1)
    assert time.process_time() - start < 2.0


@pytest.mark.parametrize("n", [12, 300])
def test_small_and_large_studies_are_made(n: int) -> None:
    """Twelve samples and three hundred."""
    study = simulate(Design(n=n, blocks=(*small(), microbes(), clinical())), 1)
    assert [len(table) for table in study.blocks.values()] == [n] * 4
    assert len(study.truth.shared) == n
