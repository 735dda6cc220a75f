"""What a fault of the data tells its reader to do, and that one slip is one fault."""

from __future__ import annotations

import io
import re
import zipfile

import pytest

from mtest.errors import DataError

PAIN = ("-11", "-12.5", "-13", "-14", "-15", "-16", "-17", "-18")
SLEEP_AS_NUMBER = ('levels = ["good", "fair", "poor"]\n', "")
EVENT = 'value = "rash"'


def only_fault(caught) -> str:
    (fault,) = caught.value.faults
    return fault


SEPARATORS = {
    "decimal commas": (b"id;arm\n1;0,5\n", "semicolons"),
    "quotation marks": (b'"id";"arm"\n"1";"0,5"\n', "semicolons"),
    "byte order mark and Windows lines": (b"\xef\xbb\xbfid;arm\r\n1;0,5\r\n", "semicolons"),
    "tabs": (b"id\tarm\n1\t0,5\n", "tabs"),
    "tabs with an empty first name": (b"\tid\tarm\n1\t2\t0,5\n", "tabs"),
}


@pytest.mark.parametrize(("raw", "word"), SEPARATORS.values(), ids=SEPARATORS.keys())
def test_another_separator_is_the_only_fault(study, raw, word):
    study.assemble()
    (study.folder / "subjects.csv").write_bytes(raw)
    with pytest.raises(DataError, match="separated by commas") as caught:
        study.again()
    assert only_fault(caught) == (
        f"subjects.csv, line 1: cells must be separated by commas; got {word}. Export with commas and decimal points."
    )


def test_a_semicolon_within_a_name_among_commas_is_no_separator(study):
    trial, _ = study.assemble(subjects=(("dose", "dose; mg"),))
    assert len(trial.subject_ids) == 8


def _workbook() -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w") as archive:
        archive.writestr("xl/workbook.xml", "<workbook/>")
    return buffer.getvalue()


FORMS = {
    "workbook": (_workbook(), "subjects.csv: a CSV file must be text; this is an Excel workbook; export it as CSV."),
    "a header without end": (b"x" * 200_000, "line 1: a CSV row must be well formed; got a row that is not"),
    "old workbook": (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "this is an Excel workbook; export it as CSV."),
    "UTF-16, little end first": (
        b"\xff\xfe" + "id,arm\n1,gel\n".encode("utf-16-le"),
        "subjects.csv: a CSV file must be UTF-8 text; got UTF-16. Save the file as UTF-8, in Excel: CSV UTF-8.",
    ),
    "UTF-16, big end first": (b"\xfe\xff" + "id,arm\n".encode("utf-16-be"), "got UTF-16."),
    "Latin letters": (
        b"id,arm\n1,\xe9\n",
        "line 2: a CSV file must be UTF-8 text; got a byte that is not. Save the file",
    ),
    "Latin letters in Excel": (b"id,arm\n1,\xe9\n", "Save the file as UTF-8, in Excel: CSV UTF-8."),
}


@pytest.mark.parametrize(("raw", "sentence"), FORMS.values(), ids=FORMS.keys())
def test_a_file_of_another_form_is_named(study, raw, sentence):
    study.assemble()
    (study.folder / "subjects.csv").write_bytes(raw)
    with pytest.raises(DataError, match=re.escape(sentence)) as caught:
        study.again()
    assert only_fault(caught)


def test_a_header_that_begins_with_the_letters_pk_is_no_workbook(study):
    trial, _ = study.assemble(
        subjects=(("id,arm", "PK,arm"),), plan=(('subject = "id"', 'subject = "PK"'),), visits=(("id,", "PK,"),)
    )
    assert len(trial.subject_ids) == 8


@pytest.mark.parametrize("name", ["data", "data.csv", "data.parquet"])
def test_a_folder_is_told_as_a_folder_whatever_its_name(study, name):
    study.assemble()
    (study.folder / name).mkdir()
    with pytest.raises(DataError, match=rf"^{re.escape(name)}: a data file must be a file; got a folder\."):
        study.again(plan=(("subjects.csv", name),))


NUMBERS = {
    "decimal commas": (("-11,5", "-13,5", "14,0"), "Export with decimal points."),
    "decimal commas for the most part": (("-11,5", "-13,5", "x"), "Export with decimal points."),
    "decimal commas for the lesser part": (("-11,5", "y", "x"), "Correct the cell, or leave it empty"),
    "dates": (("2024-01-31", "2024-02-01", "2024-02-02"), "Name another column, or derive a number (days)."),
    "dates, day first": (("31/01/2024", "1/2/2024", "02/02/24"), "Name another column, or derive a number (days)."),
    "dates with points": (("31.01.2024", "1.2.2024", "2.2.2024"), "Name another column, or derive a number (days)."),
    "dates with the month's name": (("31JAN2024", "1 Feb 2024", "2-Mar-24"), "or derive a number (days)."),
    "dates with the time": (("2024-01-31T08:00", "2024-01-31 09:00:00", "2024/01/31"), "derive a number (days)."),
    "words": (("much", "little", "none"), "Correct the cell, or leave it empty, NA or '.' if the value is missing."),
}


@pytest.mark.parametrize(("cells", "do"), NUMBERS.values(), ids=NUMBERS.keys())
def test_text_for_numbers_leads_to_what_to_do_about_its_kind(study, cells, do):
    changes = tuple((old + "\n", f'"{new}"\n') for old, new in zip(("-11", "-13", "-14"), cells))
    with pytest.raises(DataError, match="column 'change' must be a number .*" + re.escape(do)) as caught:
        study.assemble(visits=changes)
    assert ("Correct the cell" in only_fault(caught)) == do.startswith("Correct")


def test_words_for_an_ordinal_endpoint_without_levels_lead_to_its_levels(study):
    sentence = "Correct the cell, leave it empty, NA or '.' if the value is missing, or list its levels in the plan."
    with pytest.raises(DataError, match=re.escape(sentence)) as caught:
        study.assemble(plan=(SLEEP_AS_NUMBER,))
    assert "column 'sleep' must be a number" in only_fault(caught)


@pytest.mark.parametrize("event", ["", "\nevent = 1", "\nevent = true", '\nevent = "1"'])
def test_two_words_for_a_binary_endpoint_are_offered_as_its_event(study, event):
    words = [(f"{word},{code},", f"{word},{'yes' if code else 'no'},") for word, code in SLEEP_AND_RASH]
    with pytest.raises(DataError, match=r"In the plan name 'no' or 'yes' as event\.$") as caught:
        study.assemble(plan=((EVENT, EVENT + event),), subjects=tuple(words))
    assert "Correct the cell" not in only_fault(caught)


SLEEP_AND_RASH = [
    ("good", 0),
    ("fair", 1),
    ("poor", 1),
    ("good", 0),
    ("fair", 1),
    ("good", 0),
    ("poor", 1),
    ("poor", 1),
]


def test_two_words_for_an_analysis_set_are_offered_to_the_plan(study):
    with pytest.raises(DataError, match=r"column 'kept' must be a number .*In the plan name 'Y' or 'N'\.$") as caught:
        study.assemble(plan=(('kept = "Y"', "kept = 1"),))
    assert only_fault(caught)


@pytest.mark.parametrize("rule", ["", '\nstatistic = "rank"\nmissing = "worst-score"'])
def test_an_endpoint_of_missing_values_only_is_one_fault_with_file_and_column(study, rule):
    with pytest.raises(DataError, match="visits") as caught:
        study.assemble(
            plan=(('better = "lower"', f'better = "lower"{rule}'),), visits=tuple((old + "\n", "NA\n") for old in PAIN)
        )
    assert only_fault(caught) == (
        "visits.csv: column 'change' must hold at least one value for parameter 'PAIN' at visit 'W12' "
        '(endpoint[1] "Pain"); got none. Name another column, or take the endpoint out of the plan.'
    )


def test_a_column_of_the_subject_table_without_values_is_named(study):
    cells = tuple((f",{word},{code},", f",,{code},") for word, code in SLEEP_AND_RASH)
    with pytest.raises(DataError, match=r"subjects\.csv: column 'sleep' must hold at least one value \(endpoint\[2\]"):
        study.assemble(subjects=cells)


def test_an_endpoint_of_no_family_may_be_empty(study):
    trial, _ = study.assemble(
        plan=(('endpoints = "all"', 'endpoints = ["Rash"]'),), visits=tuple((old + "\n", "NA\n") for old in PAIN)
    )
    assert trial.endpoints[0].name == "Pain"


def test_an_arm_that_the_data_spell_otherwise_is_one_fault(study):
    with pytest.raises(DataError, match=r"got 'gel'\. Did you mean 'gell'\?") as caught:
        study.assemble(plan=(('"gel"', '"gell"'),))
    assert "must hold one of randomisation.arms" in only_fault(caught)


def test_an_arm_that_no_label_is_near_is_still_told_to_be_empty(study):
    with pytest.raises(DataError, match="arm 'placebo' must have at least one subject") as caught:
        study.assemble(plan=(('"gel"]', '"gell", "placebo"]'),))
    assert len(caught.value.faults) == 2
