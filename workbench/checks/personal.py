"""Columns of the sample sheet that look like personal data."""

from __future__ import annotations

import re

import pandas as pd

from workbench.checks.data import StudyData
from workbench.checks.finding import Finding, finding_id
from workbench.intake.faults import counted
from workbench.intake.kinds import present
from workbench.intake.tokens import word_set

CHECK = "personal_data"
MOST = 0.5
FEWEST = 3

_MAIL = re.compile(r"[^@\s]+@[^@\s]+\.[A-Za-z]{2,}")
_PHONE = re.compile(
    r"(\+\d{1,3}[\s./-]?)?(\(\d{1,5}\)[\s./-]?)?\d{2,5}([\s./-]\d{2,8}){1,4}|\+\d{8,15}|00\d{9,14}"
)
_PERSON = re.compile(
    r"(?:(?:Mr|Mrs|Ms|Dr|Prof)\.? )?[^\W\d_a-z][^\W\d_]+(?:[ -][^\W\d_a-z]\.?)?[ ][^\W\d_a-z][^\W\d_]+"
    r"|[^\W\d_a-z][^\W\d_]+, ?[^\W\d_a-z][^\W\d_]*\.?"
)
_DAY = re.compile(
    r"(?:19|20)\d{2}[-/.]\d{1,2}[-/.]\d{1,2}.*|\d{1,2}[-/.]\d{1,2}[-/.](?:(?:19|20)\d{2}|\d{2})"
)
_SOCIAL = re.compile(r"\d{3}-\d{2}-\d{4}|[A-Z]{2}\d{6}[A-D]|\d{6}[-+]\d{3}[\dA-Z]")
_ADDRESS = re.compile(
    r".*\d.*\b(street|st|road|rd|avenue|ave|lane|strasse|straße|weg|rue|via|calle)\b.*", re.IGNORECASE
)

# Words by which sample sheets name such columns, in a few languages (common practice; from memory).
_NAMED = {
    "a person's name": (
        "surname lastname firstname forename givenname familyname middlename fullname patientname maidenname "
        "donorname subjectname participantname vorname nachname prenom apellido cognome initials"
    ),
    "a date of birth": "dob birthdate dateofbirth birthday birth born geburtsdatum datedenaissance fechadenacimiento",
    "a record number": (
        "mrn medicalrecord medicalrecordnumber recordnumber hospitalnumber hospitalid nhsnumber nhs ssn "
        "socialsecurity socialsecuritynumber insurancenumber nationalid passport chi casenumber personnummer"
    ),
    "an e-mail address": "email mail emailaddress",
    "a telephone number": "phone telephone tel mobile phonenumber handy telefon",
    "a postal address": "address street postcode zip zipcode postalcode plz adresse residence",
}  # fmt: skip
_WORDS = {word: kind for kind, words in _NAMED.items() for word in words.split()}
_TOKENS = word_set("dob mrn ssn nhs email mail phone telephone tel surname forename birthdate")


def personal_data(data: StudyData) -> list[Finding]:
    """Find columns of the sample sheet that look like names, birth dates, record numbers, mail or phone.

    By the column's name, or because half of its cells (three at least) have the form. What the cells hold is
    told nowhere. The sample ids are looked at as well.
    """
    found = []
    ids = pd.Series([str(sample) for sample in data.sheet.index])
    by_form = _form(ids)
    if by_form:
        what = (
            f"the sample ids look like {by_form}: they stand in every table, figure and network of this study"
        )
        todo = "give the samples ids that say nothing about a person, in the sheet and in the tables"
        found.append(Finding(finding_id(CHECK, "", "ids"), CHECK, "warning", "", what, (), (), todo))
    for column in map(str, data.sheet.columns):
        kind = personal_kind(column, data.sheet[column])
        if kind:
            held = len(present(data.sheet[column]))
            what = f"column '{column}' of the sample sheet looks like {kind} ({counted(held, 'cell')})"
            todo = (
                f"take the column out of samples.tsv (and of the file it came from), or put a code in its place; no "
                f"analysis needs it: `workbench add-samples FILE --replace` with a sheet without '{column}'"
            )
            found.append(Finding(finding_id(CHECK, "", column), CHECK, "warning", "", what, (), (), todo))
    return found


def personal_kind(name: str, cells: pd.Series) -> str:
    """Return what personal data a column looks like, or "".

    >>> personal_kind("Date of birth", pd.Series(["1961-03-02"]))
    'a date of birth'
    >>> personal_kind("contact", pd.Series(["a@lab.org", "b@lab.org", "c@lab.org"]))
    'an e-mail address'
    >>> personal_kind("sample_name", pd.Series(["S1", "S2"])), personal_kind("run_day", pd.Series(["day1"]))
    ('', '')
    """
    text = present(cells)
    if text.empty:
        return ""
    plain = re.sub(r"[^a-zß-ÿ]", "", name.casefold())
    words = set(re.findall(r"[a-zß-ÿ]+", re.sub(r"(?<=[a-z])(?=[A-Z])", " ", name).casefold()))
    by_name = _WORDS.get(plain) or next((_WORDS[word] for word in sorted(words & _TOKENS)), "")
    if by_name == "a date of birth" and not _dates_or_years(text):
        by_name = ""
    return by_name or _form(text)


def _dates_or_years(text: pd.Series) -> bool:
    """Return whether most cells are days or years: ``birth`` may also name a weight or a mode."""
    return bool(
        text.map(lambda cell: bool(_DAY.fullmatch(cell) or re.fullmatch(r"(19|20)\d{2}", cell))).mean()
        >= MOST
    )


def _form(text: pd.Series) -> str:
    """Return what most cells have the form of, or ""."""
    for kind, form in (
        ("an e-mail address", _MAIL),
        ("a record number", _SOCIAL),
        ("a postal address", _ADDRESS),
    ):
        if _mostly(text, form):
            return kind
    telephones = (
        _mostly(text, _PHONE) and text.map(lambda cell: 8 <= sum(map(str.isdigit, cell)) <= 15).mean() >= MOST
    )
    if telephones and not _mostly(text, _DAY):
        return "a telephone number"
    if _mostly(text, _PERSON) and text.nunique() >= max(FEWEST, 0.8 * len(text)):
        return "a person's name"
    return ""


def _mostly(text: pd.Series, form: re.Pattern[str]) -> bool:
    matches = int(text.map(lambda cell: form.fullmatch(cell) is not None).sum())
    return matches >= FEWEST and matches >= MOST * len(text)
