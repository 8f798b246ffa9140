"""Agreement of every two blocks: by sample names, restricted where the design asks, said where it cannot be."""

from __future__ import annotations

import dataclasses

import numpy as np
from look_views import bare, planted

from workbench.look import Restriction, between_reading, between_table, look_between


def test_samples_are_matched_by_name_whatever_their_order() -> None:
    a, b = planted(seed=0), dataclasses.replace(planted(seed=0), name="lipids")
    order = np.random.default_rng(1).permutation(36)[:30]
    samples = tuple(b.samples[i] for i in order)
    shuffled = bare(b.prepared[order], name="lipids", samples=samples, columns=b.columns.iloc[order])
    found = look_between([a, shuffled], seed=1, permutations=99).pairs[0]
    assert found.n == 30
    assert round(found.found.rv_adjusted, 9) == 1.0
    assert "the samples lie alike in both" in between_reading(look_between([a, shuffled], seed=1))[0]


def test_a_shared_batch_is_taken_out_where_the_design_asks() -> None:
    a, b = planted(seed=0), dataclasses.replace(planted(seed=5), name="lipids")
    days = np.array([[float(day == d) for d in ("day2", "day3")] for day in a.columns.run_day])
    groups = (a.columns.condition == "drought").to_numpy(dtype=float)[:, None]
    free = look_between([a, b], seed=1).pairs[0].found
    restriction = Restriction(a.samples, columns=np.hstack([days, groups]))
    removed = look_between([a, b], seed=1, restriction=restriction).pairs[0].found
    assert free.rv_p <= 0.01
    assert removed.rv_p > 0.05
    cells = (a.columns.run_day.map({"day1": 0, "day2": 1, "day3": 2}) * 2 + groups[:, 0]).to_numpy(
        dtype=np.intp
    )
    inside = look_between(
        [a, b], seed=1, restriction=Restriction(a.samples, strata=cells, words="within cells")
    )
    assert inside.pairs[0].found.rv_p > 0.05
    assert between_reading(inside)[-1] == "Permutations: within cells."


def test_a_further_block_changes_no_figure_of_the_others() -> None:
    a, b = planted(seed=0), dataclasses.replace(planted(seed=5), name="lipids")
    third = dataclasses.replace(planted(seed=6), name="proteins")
    two, three = (
        look_between([a, b], seed=1, permutations=99),
        look_between([a, third, b], seed=1, permutations=99),
    )
    assert two.pairs[0].found == next(
        p.found for p in three.pairs if (p.one, p.other) == ("metabolites", "lipids")
    )
    assert len(three.pairs) == 3


def test_what_cannot_be_compared_is_said() -> None:
    a = planted()
    strangers = bare(np.random.default_rng(0).normal(size=(5, 8)), name="other")
    few = bare(a.prepared[:3], name="few", samples=a.samples[:3])
    still = bare(np.ones((36, 4)), name="still", samples=a.samples)
    lines = between_reading(look_between([a, strangers, few, still], seed=1, permutations=99))
    assert "metabolites and other, 0 samples in common: not compared: no sample in common." in lines
    assert any("metabolites and few" in text and "at least 4" in text for text in lines)
    assert any("metabolites and still" in text and "none of the 4 features varies" in text for text in lines)


def test_the_table_has_a_row_for_each_pair() -> None:
    a, b = planted(seed=0), dataclasses.replace(planted(seed=5), name="lipids")
    strangers = bare(np.random.default_rng(0).normal(size=(5, 8)), name="other")
    table = between_table(look_between([a, b, strangers], seed=1, permutations=99))
    assert table.shape[0] == 3
    assert table["reason"].tolist() == ["", "no sample in common", "no sample in common"]
    assert table["rv"].notna().tolist() == [True, False, False]


def test_one_block_has_nobody_to_agree_with() -> None:
    look = look_between([planted()], seed=1)
    assert look.pairs == ()
    assert between_reading(look) == ()
    assert between_table(look).empty
