"""The look on real data: 198 breast tumours, 76 transcripts (shipped with scikit-survival, GEO GSE7390).

That oestrogen-receptor status and grade are the main axes of expression in breast tumours is long known:
Perou et al. 2000, Nature 406:747; Sotiriou et al. 2006, J Natl Cancer Inst 98:262.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from sksurv.datasets import load_breast_cancer

from workbench.look import BlockLook, BlockView, block_reading, levels_of, look_at_block, look_between


def views() -> tuple[BlockView, BlockView]:
    table, _ = load_breast_cancer()
    genes = [column for column in table if column.startswith("X")]
    samples = tuple(f"P{i:03d}" for i in range(len(table)))
    clinical = table.drop(columns=genes).set_index(pd.Index(samples))
    receptor = (clinical["er"] == "positive").to_numpy(dtype=np.float64)
    readings = np.column_stack([clinical["age"], clinical["size"], receptor]).astype(np.float64)
    shared = {"samples": samples, "columns": clinical}
    expression = BlockView(
        name="transcripts", layer="transcripts", values="log", features=tuple(genes),
        prepared=table[genes].to_numpy(dtype=np.float64), groups=levels_of("er", clinical["er"].tolist()), **shared,
    )  # fmt: skip
    return expression, BlockView(
        name="clinical",
        layer="clinical",
        values="mixed",
        features=("age", "size", "er"),
        prepared=readings,
        **shared,
    )


@pytest.fixture(scope="module")
def look() -> BlockLook:
    return look_at_block(views()[0], seed=1)


def test_receptor_status_and_grade_are_the_main_source(look: BlockLook) -> None:
    main = next(line for line in block_reading(look) if line.startswith("Main source"))
    assert "component 1" in main
    assert "grade (R2 0.3" in main
    assert "er (R2 0.2" in main
    assert "er most on component 1" in "\n".join(block_reading(look))


def test_several_components_carry_signal_and_far_from_all(look: BlockLook) -> None:
    assert 3 <= look.number.number <= 20


def test_expression_and_clinical_readings_agree_beyond_chance() -> None:
    found = look_between(views(), seed=1, permutations=199).pairs[0].found
    assert found.rv_p == found.smallest_p
    assert 0.05 < found.rv_adjusted < 0.5
