"""Ids that a spreadsheet has made into dates are found in the forms it writes; names that only resemble them stay."""

from datetime import date

import pytest
from hypothesis import given
from hypothesis import strategies as st

from workbench.intake.dates import is_date, suspicious_numbers


def words_of(text):
    return text.split()


# Forms from the display formats of spreadsheets in several languages (common practice; from memory).
DATES = words_of("""2-Sep 1-Mar 02-Sep 10-Mar 1-Dec 2-Sep-24 2-Sep-2024 Sep-02 Mar-01 Sep-2024 2/Sep 02/set
01-mars 02-sept 2024-09-02 2024-9-2 2024/09/02
2024-09-02T00:00:00 9/2/2024 02/09/2024 9/2/24 02.09.2024 2.9.2024
1-mrt 1-ene 01-dic 1-dic 2-okt 9月2日 2024年9月2日 15-oct""")
DATES += ["2024-09-02 00:00:00", "02. Sep", "1. Mrz", "1. Mär 2024", "2 Sep 2024", "2 Sep"]

NAMES = words_of("""SEPT2 MARCH1 MAR1 DEC1 OCT4 Oct-4 Oct-1 Sep15 1-octanol 2-sep-1 MARC1 NOV1 18:1/20:4
1.3.1.1 1.1.2024.5
PC(16:0/18:1) 2-1 12-34 ENSG00000000003 1.5 44075 9/2 32/13/2024 2024-13-01 2024-02 may Sep 3-methylhistidine
00-Sep 32-Sep Sep-2 10-formyl-THF 1e5 NA""")


@pytest.mark.parametrize("text", DATES)
def test_a_date_is_known(text):
    assert is_date(text)
    assert is_date(f" {text.upper()} ")


@pytest.mark.parametrize("text", NAMES)
def test_a_name_is_no_date(text):
    assert not is_date(text)


@given(st.dates(min_value=date(1900, 1, 1), max_value=date(2099, 12, 31)))
def test_every_day_in_the_iso_and_in_the_short_form_is_a_date(day):
    assert is_date(day.isoformat())
    assert is_date(f"{day.day}-{day:%b}")
    assert is_date(f"{day:%m/%d/%Y}")


def test_numbers_are_suspicious_only_where_hardly_any_id_is_a_number():
    names = [f"GENE{k}" for k in range(100)]
    assert suspicious_numbers([*names, "44075", "7.0E+10"]) == ("44075", "7.0E+10")
    assert suspicious_numbers([str(k) for k in range(40000, 40100)]) == ()
    assert suspicious_numbers([*names, "1e5", "100130426"]) == ()
