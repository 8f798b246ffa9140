"""Names that a spreadsheet changed, names that nearly stand twice, and personal data."""

from __future__ import annotations

from dataclasses import replace

import pandas as pd
import pytest
from checks.studies import checked, small_study

from workbench.checks.identifier_columns import check_identifier_columns
from workbench.checks.identifiers import check_identifiers, damaged_names, similar_names
from workbench.checks.personal import personal_kind

SYMBOLS = [f"GENE{k}" for k in range(60)]


def with_annotations(column):
    study = small_study()
    data = checked(study)
    block = data.blocks["transcripts"]
    block.annotations[column.name] = column.reindex(range(len(block.features))).fillna("").to_numpy()
    return data


def test_dates_among_the_symbols_of_the_annotations_are_found_with_their_features():
    data = with_annotations(pd.Series([*SYMBOLS, "2-Sep", "1-Mar", "2024-09-07 00:00:00"], name="symbol"))
    (finding,) = check_identifiers(data)
    assert finding.id == "damaged_identifiers-transcripts-symbol"
    assert finding.features == data.blocks["transcripts"].features[60:63]
    assert "3 dates" in finding.what


def test_a_column_of_dates_and_one_of_numbers_are_left_alone():
    assert check_identifiers(with_annotations(pd.Series(["2024-01-05"] * 60, name="measured"))) == []
    assert (
        check_identifiers(with_annotations(pd.Series([str(40000 + k) for k in range(60)], name="entrez")))
        == []
    )


def test_dates_in_a_spare_table_are_found():
    table = pd.DataFrame({"symbol": [*SYMBOLS, "2-Sep", "3-Mar", "1-Dec"], "note": "x"})
    (finding,) = check_identifiers(checked(small_study(), spare_tables={"spare.tsv": table}))
    assert finding.id == "damaged_identifiers-spare.tsv-symbol"
    assert finding.features == ("2-Sep", "3-Mar", "1-Dec")


def test_dates_among_feature_ids_are_an_error():
    study = small_study()
    table = study.blocks["transcripts"].rename(columns={"tran00001": "2-Sep"})
    found = check_identifiers(checked(study, tables={"transcripts": table}))
    assert [(finding.severity, finding.features) for finding in found] == [("error", ("2-Sep",))]


def test_few_names_are_not_judged():
    assert damaged_names(["2-Sep", "GENE1"]) == ((), ())


@pytest.mark.parametrize(
    ("names", "families"),
    [
        (["TP53", "tp53"], 1),
        (["alpha  ketoglutarate", "Alpha ketoglutarate "], 1),
        (["NM_000546.5", "NM_000546.6"], 1),
        (["ENSMUSG00000059552", "ENSMUSG00000059552.3"], 1),
        (["MDM2", "MDM2.1"], 1),
        (["RP11-34P13.7", "RP11-34P13.8"], 0),
        (["M123.1", "M123.2"], 0),
        (["PC 34:1", "PC 34:2"], 0),
        (["1.5", "1"], 0),
        (["GENE1", "GENE10", "GENE11"], 0),
    ],
)
def test_names_that_differ_only_in_writing_are_families(names, families):
    assert len(similar_names(names)) == families


@pytest.mark.parametrize(
    ("name", "cells", "kind"),
    [
        ("Surname", ["Miller", "Smith"], "a person's name"),
        ("contact", ["Anna Schmidt", "Bob O. Miller", "Chloé Durand"], "a person's name"),
        ("who", ["Schmidt, A.", "Miller, Bob", "Durand, Chloé"], "a person's name"),
        ("birth_date", ["03.02.1961", "11.12.1975"], "a date of birth"),
        ("MRN", ["000123", "000124"], "a record number"),
        ("number", ["123-45-6789", "223-45-6789", "323-45-6789"], "a record number"),
        ("reach", ["+49 151 1234567", "+49 151 1234568", "+49 151 1234569"], "a telephone number"),
        ("e-mail", ["a@b.org"], "an e-mail address"),
        ("home", ["12 Long Street", "3 Mill Road", "9 Park Lane"], "a postal address"),
    ],
)
def test_columns_about_persons_are_recognised(name, cells, kind):
    assert personal_kind(name, pd.Series(cells)) == kind


@pytest.mark.parametrize(
    ("name", "cells"),
    [
        ("group", ["control", "treated", "control"]),
        ("species", ["Homo sapiens", "Homo sapiens", "Mus musculus"]),
        ("tissue", ["Left Ventricle", "Right Ventricle", "Left Ventricle", "Left Ventricle"]),
        ("run_date", ["2024-01-05", "2024-01-06", "2024-01-07"]),
        ("birth_weight", ["3400", "2900", "3100"]),
        ("age", ["61", "44", "39"]),
        ("barcode", ["1234567890", "1234567891", "1234567892"]),
        ("medium", ["DMEM 10", "RPMI 20", "DMEM 10"]),
        ("strain", ["Col-0", "Ler-1", "Ws-2"]),
        ("email_sent", ["", "", ""]),
        ("sample_name", ["S1", "S2", "S3"]),
    ],
)
def test_columns_about_samples_are_left_alone(name, cells):
    assert personal_kind(name, pd.Series(cells)) == ""


def test_identifiers_of_a_known_kind_are_held_against_its_form():
    data = checked(small_study())
    block = data.blocks["metabolites"]
    n = len(block.features)
    cells = [f"HMDB{k:07d}" for k in range(1, n + 1)]
    cells[3], cells[5], cells[8] = "HMDB122", "HMDB00077", cells[9]
    names = pd.DataFrame(
        {"hmdb": cells, "note": [None, *["x"] * (n - 1)]}, index=list(block.features), dtype=object
    )
    odd = replace(data, blocks={"metabolites": replace(block, annotations=names)})
    (found,) = check_identifier_columns(odd)
    assert (found.id, found.severity) == ("identifiers-metabolites-hmdb", "warning")
    assert "1 cell with too few or too many digits, perhaps lost zeros: 'HMDB122'" in found.what
    assert "1 identifier is that of several features" in found.what
    assert set(found.features) == {block.features[k] for k in (3, 5, 8, 9)}
    whole = replace(block, annotations=names.assign(hmdb=[f"HMDB{k:05d}" for k in range(n)]))
    (note,) = check_identifier_columns(replace(data, blocks={"metabolites": whole}))
    assert note.severity == "note"
    assert check_identifier_columns(data) == []
