"""Public identifiers are recognised by their shape; spoilt ones, many-to-one and dates are found, none is mended."""

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from intake.delivered import SHEET, tabbed, workbook, write

from workbench.intake import (
    build_block,
    date_like,
    identifier_columns,
    identifier_kind,
    read_identifiers,
    split_identifiers,
)
from workbench.intake.dates import is_date
from workbench.settings.schema import BlockSettings

# Identifiers of well-known entries: TP53 and BRCA1, their proteins, glucose and citrate, palmitate (from memory).
SOUND = {
    "ensembl": ["ENSG00000141510", "ENSG00000012048", "ENSMUSG00000059552", "ENST00000269305"],
    "entrez": ["7157", "672", "22059"],
    "uniprot": ["P04637", "P38398-2", "A0A024R161"],
    "hmdb": ["HMDB0000122", "HMDB0000094"],
    "chebi": ["CHEBI:17234", "CHEBI:30769"],
    "kegg": ["C00031", "C00158", "K04451"],
    "inchikey": ["WQZGKKKJIJFFOK-GASJEMHNSA-N", "KRKNYBCHXYNGOX-UHFFFAOYSA-N"],
    "lipidmaps": ["LMFA01010001", "LMGP01010005", "LMST01010001"],
}
NAMED = {"entrez": "entrez_id", "kegg": "kegg"}


@pytest.mark.parametrize("kind", SOUND)
def test_sound_identifiers_are_recognised_and_without_fault(kind):
    found = read_identifiers(NAMED.get(kind, "x"), SOUND[kind])
    assert (found.kind, found.filled, found.sound) == (kind, len(SOUND[kind]), len(SOUND[kind]))
    assert (found.faults, found.several, found.shared) == ((), (), {})


FAULTY = {
    "version": ("ensembl", "ENSG00000141510.17", False),
    "digits of a gene": ("ensembl", "ENSG141510", True),
    "old form": ("hmdb", "HMDB00122", False),
    "digits": ("hmdb", "HMDB122", True),
    "case": ("uniprot", "p04637", False),
    "form without its prefix's colon": ("chebi", "CHEBI17234", True),
    "digits of a compound": ("kegg", "C31", True),
    "form of the first block": ("inchikey", "WQZGKKKJIJFFOK", True),
    "form with a layer lost": ("inchikey", "WQZGKKKJIJFFOK-GASJEMHNSA", True),
    "case of a key": ("inchikey", "wqzgkkkjijffok-gasjemhnsa-n", False),
    "digits of a lipid": ("lipidmaps", "LMFA1010001", True),
    "date": ("uniprot", "2-Sep", True),
}


@pytest.mark.parametrize("case", FAULTY)
def test_a_faulty_identifier_is_placed_and_named(case):
    kind, text, damage = FAULTY[case]
    found = read_identifiers(NAMED.get(kind, "x"), [*SOUND[kind], "", text])
    (fault,) = found.faults
    assert case.startswith(fault.fault)
    assert (found.kind, fault.positions, fault.texts) == (kind, (len(SOUND[kind]) + 1,), (text,))
    assert fault.damage == damage
    assert found.sound == found.filled - 1
    assert any(repr(text) in line for line in found.lines())


def test_other_words_and_numbers_are_no_identifiers():
    for cells in (
        ["TP53", "BRCA1"],
        ["1", "2", "3"],
        ["X", "17"],
        ["PC(16:0/18:1)"],
        ["", "NA"],
        ["12.5", "a"],
    ):
        assert identifier_kind(cells, "name") is None
    assert identifier_kind(["1", "2"], "chrom") is None
    assert identifier_kind(["C1", "C2", "C3"], "cluster") is None
    assert identifier_kind(["C1", "C2"], "kegg_id") == "kegg"


def test_several_identifiers_and_shared_ones_are_reported_and_not_merged():
    cells = ["P04637; P38398", "P04637", "Q9Y6K9|A0A024R161", "", "P04637 /// Q9Y6K9"]
    found = read_identifiers("uniprot", cells)
    assert found.several == (0, 2, 4)
    assert found.shared == {"P04637": (0, 1, 4), "Q9Y6K9": (2, 4)}
    assert found.filled == found.sound == 4
    assert any("2 identifiers are that of several features" in line for line in found.lines())


@given(
    st.lists(st.sampled_from(SOUND["chebi"] + SOUND["hmdb"]), max_size=5),
    st.sampled_from([";", " ; ", "|", "///"]),
)
def test_cells_of_several_come_apart_as_they_were_put_together(ids, between):
    assert list(split_identifiers(between.join(ids))) == ids


def test_feature_ids_and_annotations_are_looked_at():
    annotations = pd.DataFrame({"name": ["a", "b"], "hmdb": ["HMDB00122", ""], "mz": [1.5, 2.0]})
    ids, hmdb = identifier_columns(SOUND["ensembl"][:2], annotations)
    assert (ids.column, ids.kind, hmdb.column, hmdb.filled) == ("", "ensembl", "hmdb", 1)


# What spreadsheets show for SEPT2, MARCH1 and DEC1 in several languages and settings (common practice).
DATES = [
    "2-Sep",
    "1-Mar",
    "Sep-02",
    "Mar-01",
    "2-Sep-24",
    "02-Sep-2024",
    "2024-09-02",
    "2024/09/02",
    "9/2/2024",
]
DATES += [
    "02.09.2024",
    "9/2/24",
    "2. Sep",
    "02. Sep.",
    "1. Mrz",
    "1. Mär 2024",
    "2-sept.",
    "1-mars",
    "1-déc",
    "2/set",
]
DATES += [
    "2-Sept",
    "September-02",
    "2 September 2024",
    "Sep 2, 2024",
    "2024-09-02 00:00:00",
    "2024-09-02T00:00:00Z",
]
DATES += ["9月2日", "2024年9月2日", "9월 2일", "02.сен", "2-wrz", "02.Eyl", "1-mrt", "2-sep-24 0:00"]


@pytest.mark.parametrize("text", DATES)
def test_a_date_in_any_form_is_found_among_symbols(text):
    assert is_date(text)
    assert date_like(["TP53", "BRCA1", "", text, "EGFR"]) == (3,)
    assert date_like(["TP53; EGFR", "BRCA1", f"MYC;{text}"]) == (2,)


def test_symbols_and_lipids_are_no_dates():
    names = [
        "SEPT2",
        "SEPTIN2",
        "MARCHF1",
        "DEC1",
        "OCT4",
        "Oct-4",
        "1-methylhistidine",
        "18:1/20:4",
        "FA 18:2",
    ]
    names += [
        "3-OH-C16",
        "NOV",
        "MAR1",
        "5-HETE",
        "1-AG",
        "2-AG",
        "1,2-DG",
        "6-Ara",
        "May",
        "C16:1-OH",
        "7-1",
    ]
    assert date_like(names) == ()


def test_day_numbers_and_rounded_names_are_found_among_words_alone():
    words = [f"GENE{k}X" for k in range(8)]
    assert date_like([*words, "44075", "2.31E+19", "2,31E+19"]) == (8, 9, 10)
    assert date_like(["44075", "36951", "7157", "672"]) == ()


def test_a_column_of_dates_is_one_of_dates():
    assert date_like(["2024-09-02", "2024-09-03", "x"]) == ()


def test_dates_in_annotation_columns_come_in_as_text_to_be_found(tmp_path):
    rows = [
        ["id", "symbol", "S1"],
        *([f"g{k}", f"GENE{k}", 1] for k in range(3)),
        ["g3", pd.Timestamp("2024-09-02"), 1],
    ]
    (tmp_path / "source").mkdir()
    workbook(tmp_path / "source" / "t.xlsx", rows)
    settings = BlockSettings(file="source/t.xlsx", layer="transcripts", values="counts")
    sheet = pd.DataFrame(index=pd.Index(list(SHEET), name="sample"))
    build = build_block(settings, "rna", tmp_path, sheet)
    assert date_like(list(build.adata.var["symbol"])) == (3,)
    assert build.chosen == {"samples_in": "columns", "sheet": "data"}
    assert 1 <= len(build.decisions) <= 5


def test_annotations_of_the_table_stand_beside_those_of_the_file(tmp_path):
    (tmp_path / "source").mkdir()
    write(
        tmp_path, "source/t.tsv", tabbed("id kegg levels S1 S2", "g1 C00031 low <LOD 1", "g2 C00158 high 2 3")
    )
    write(tmp_path, "source/a.tsv", tabbed("id kegg name", "g1 C00001 glucose", "g2 C00002 citrate"))
    entries = {"file": "source/t.tsv", "layer": "metabolites", "values": "log", "annotations": "source/a.tsv"}
    sheet = pd.DataFrame(index=pd.Index(list(SHEET), name="sample"))
    build = build_block(BlockSettings(**entries), "lcms", tmp_path, sheet)
    expected = {"kegg": ["C00001", "C00002"], "name": ["glucose", "citrate"], "levels_": ["low", "high"]}
    assert build.adata.var.to_dict("list") == {**expected, "under_limit": [1, 0]}
    assert "t.tsv: column 'kegg' is left out, since the file of annotations has one too" in build.lines
