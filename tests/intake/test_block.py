"""A block is built from its settings: aligned values, the sheet's rows, annotations, an account."""

import hashlib
import json

import numpy as np
import pandas as pd
import pytest
from intake.delivered import tabbed, write

from workbench.errors import InputError
from workbench.intake import build_block, read_annotations
from workbench.intake.block import content_hash
from workbench.settings.schema import BlockSettings

SHEET = pd.DataFrame(
    {"group": ["a", "a", "b", np.nan]}, index=pd.Index(["S1", "S2", "S3", "S4"], name="sample"), dtype=object
)
TABLE = tabbed("gene S3 S1 S4", "g1 3 1 4", "g2 0 NA 7")


def built(root, text=TABLE, sheet=SHEET, **entries):
    (root / "source").mkdir(exist_ok=True)
    write(root, "source/t.tsv", text)
    settings = BlockSettings(
        **{"file": "source/t.tsv", "layer": "transcripts", "values": "counts", **entries}
    )
    return build_block(settings, "rna", root, sheet)


def test_values_and_sheet_rows_are_in_the_order_of_the_sheet(tmp_path):
    adata = built(tmp_path).adata
    assert list(adata.obs_names) == ["S1", "S3", "S4"]
    assert list(adata.var_names) == ["g1", "g2"]
    np.testing.assert_array_equal(adata.X, [[1, np.nan], [3, 0], [4, 7]])
    assert adata.X.dtype == np.float64
    assert adata.obs["group"].tolist()[:2] == ["a", "b"]
    assert adata.obs["group"].isna().tolist() == [False, False, True]
    assert adata.obs.index.name == "sample"


def test_the_account_says_what_the_block_is_and_from_which_bytes(tmp_path):
    build = built(tmp_path)
    account = json.loads(build.adata.uns["workbench"])
    source = hashlib.sha256((tmp_path / "source/t.tsv").read_bytes()).hexdigest()
    assert account == {
        "kind": "measured",
        "block": "rna",
        "layer": "transcripts",
        "values": "counts",
        "source_sha256": source,
        "content_sha256": content_hash(build.adata.X, ["S1", "S3", "S4"], ["g1", "g2"]),
        "samples_in": "columns",
    }
    assert build.adata.uns["workbench"] == built(tmp_path).adata.uns["workbench"]


def test_the_lines_tell_what_was_matched_and_what_is_missing(tmp_path):
    assert built(tmp_path).lines == (
        "block 'rna': 2 features, 3 samples of the sheet's 4",
        "t.tsv: samples are in columns, found by their ids: 3 of the sheet's 4 match",
        "t.tsv: 1 sample only in the sheet: 'S2'",
        "t.tsv: 1 cell of 6 (16.7 %) missing",
    )


def test_excluded_samples_and_features_without_variation_stay_in(tmp_path):
    text = tabbed("gene S1 S2 S3", "flat 1 1 1", "gone NA NA NA", "g 1 2 3")
    adata = built(tmp_path, text, exclude={"S1": "haemolysed"}).adata
    assert adata.shape == (3, 3)


def test_the_content_hash_knows_content_and_not_layout():
    x = np.array([[1.0, np.nan], [0.0, 2.0]])
    reference = content_hash(x, ["a", "b"], ["f", "g"])
    other_nan = np.array([[1.0, -np.nan], [-0.0, 2.0]])
    assert content_hash(np.asfortranarray(other_nan), ["a", "b"], ["f", "g"]) == reference
    assert np.signbit(other_nan[1, 0])
    changed = [
        content_hash(x + 1e-15, ["a", "b"], ["f", "g"]),
        content_hash(x.T, ["a", "b"], ["f", "g"]),
        content_hash(x, ["b", "a"], ["f", "g"]),
        content_hash(x, ["a", "b"], ["f", "h"]),
        content_hash(x, ["a"], ["b", "f", "g"]),
    ]
    assert len({reference, *changed}) == 6


def test_a_mixed_block_keeps_its_levels_with_the_features(tmp_path):
    text = tabbed("id sex age", "S1 male 61", "S2 female 52", "S3 NA 47")
    adata = built(tmp_path, text, layer="clinical", values="mixed").adata
    assert adata.var["kind"].tolist() == ["text", "number"]
    assert [json.loads(t) if t else "" for t in adata.var["levels"]] == [["female", "male"], ""]
    np.testing.assert_array_equal(adata.X, [[1, 61], [0, 52], [np.nan, 47]])


ANNOTATIONS = "gene\tensembl\tentrez\ng9\tENSG9\t9\ng2\tENSG2\t0012\n"


def test_annotations_are_text_in_the_order_of_the_features(tmp_path):
    write(tmp_path, "genes.tsv", ANNOTATIONS)
    build = built(tmp_path, annotations="genes.tsv")
    assert build.adata.var.loc["g2"].to_dict() == {"ensembl": "ENSG2", "entrez": "0012"}
    assert build.adata.var.loc["g1"].to_dict() == {"ensembl": "", "entrez": ""}
    assert build.lines[-3:] == (
        "genes.tsv: 1 feature of 2 annotated",
        "genes.tsv: without annotation: 'g1'",
        "genes.tsv: 1 row is of features that the table does not have; left out",
    )


ODD_ANNOTATIONS = {
    "no feature": (
        "symbol\tgene\nA\tg1\nB\tg2\n",
        ["no feature", "'g1', 'g2'", "'A', 'B'", "column 'gene' has 2 of them"],
    ),
    "no feature anywhere": ("symbol\tgene\nA\tx\n", ["no feature", "use the same ids"]),
    "a feature twice": ("gene\tkegg\ng1\tK1\ng1\tK2\n", ["'g1': line 2, column 1, line 3, column 1"]),
    "a column twice": ("gene\tkegg\tkegg\ng1\tK1\tK2\n", ["'kegg': line 1, column 2, line 1, column 3"]),
    "dates": ("gene\tkegg\ng1\tK1\n2-Sep\tK2\n", ["'2-Sep' (line 3, column 1)"]),
    "one column": ("gene\ng1\n", ["one column only"]),
    "a ragged line": ("gene\tkegg\ng1\tK1\tK2\n", ["line 2 ('g1') has 3 fields"]),
}


@pytest.mark.parametrize("case", ODD_ANNOTATIONS)
def test_odd_annotations_are_refused(case, tmp_path):
    content, pieces = ODD_ANNOTATIONS[case]
    path = write(tmp_path, "genes.tsv", content)
    with pytest.raises(InputError, match=r"genes\.tsv") as caught:
        read_annotations(path, ["g1", "g2"])
    for piece in pieces:
        assert piece in str(caught.value)


def test_annotations_of_a_mixed_block_may_not_take_the_names_of_its_own_columns(tmp_path):
    write(tmp_path, "items.tsv", "item\tkind\nsex\tquestionnaire\n")
    text = tabbed("id sex age", "S1 male 61", "S2 female 52")
    with pytest.raises(
        InputError, match=r"items\.tsv: column 'kind' has a name that blocks use themselves; rename"
    ):
        built(tmp_path, text, values="mixed", annotations="items.tsv")


def test_files_of_the_settings_that_are_not_there_are_named(tmp_path):
    with pytest.raises(InputError, match=r"genes\.tsv: there is no such file"):
        built(tmp_path, annotations="genes.tsv")
