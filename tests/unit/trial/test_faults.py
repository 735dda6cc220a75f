"""Each fault of the data is a sentence with file and rows, and all are told at once."""

from __future__ import annotations

import re

import pytest

from mtest.errors import DataError

ONE_ENDPOINT = ('endpoints = "all"\ncomparisons', 'endpoints = ["Pain"]\ncomparisons')

SUBJECT_FAULTS = {
    "missing arm column": (
        [("id,arm", "id,arms")],
        "subjects.csv: column 'arm' must exist (the arm each subject was randomised to); got no such column. "
        "Did you mean 'arms'?",
    ),
    "missing identifier column": ([("id,arm", "subject,arm")], "column 'id' must exist (the subject's identifier)"),
    "missing stratum column": (
        [("site,", "place,")],
        "subjects.csv: column 'site' must exist (the stratum each subject was randomised in); got no such column. "
        "The file has id, arm, place, sex,",
    ),
    "missing endpoint column": (
        [("sleep", "sleap")],
        "subjects.csv: column 'sleep' must exist (endpoint[2] \"Sleep\"); got no such column. Did you mean 'sleap'?",
    ),
    "missing column of an analysis set": ([("kept", "x")], "column 'kept' must exist (analysis_set[1] \"kept\")"),
    "duplicate columns": (
        [("sleep,rash", "rash,rash")],
        "subjects.csv: the columns of a data file must have different names; got 'rash' 2 times. Rename or remove "
        "them.",
    ),
    "duplicate subjects": (
        [("001,gel", "007,gel")],
        "subjects.csv, lines 2 and 4: each subject must have one row; got subject '007' 2 times. Remove the others, or "
        "put visits into a [[data.long]].",
    ),
    "identifiers that differ in white space": (
        [("001,gel", " 007 ,gel")],
        "subjects.csv, lines 2 and 4: each subject must have one row; got subject '007' 2 times.",
    ),
    "empty identifier": (
        [("001,gel", ",gel"), ("005,veh", " ,veh")],
        "subjects.csv, lines 4 and 7: column 'id' must hold each subject's identifier; got an empty cell.",
    ),
    "unknown arm": (
        [("007,gel", "007,gell")],
        "subjects.csv, line 2: column 'arm' must hold one of randomisation.arms, 'vehicle' or 'gel'; got 'gell'. "
        "Did you mean 'gel'?",
    ),
    "arm in other letters": ([("007,gel", "007,Gel")], "got 'Gel'. Did you mean 'gel'?"),
    "arm unlike any": (
        [("007,gel", "007,xyz"), ("004,gel", "004,xyz")],
        "subjects.csv, lines 2 and 6: column 'arm' must hold one of randomisation.arms, 'vehicle' or 'gel'; got 'xyz'. "
        "Correct the cell, or add the arm to randomisation.arms.",
    ),
    "empty arm": (
        [("007,gel", "007,")],
        "subjects.csv, line 2: column 'arm' must hold one of randomisation.arms, 'vehicle' or 'gel'; got empty text.",
    ),
    "NA is no arm": ([("007,gel", "007,NA")], "or 'gel'; got 'NA'."),
    "arm without subject": (
        [
            ("007,gel", "007,vehicle"),
            ("001,gel", "001,vehicle"),
            ("004,gel", "004,vehicle"),
            ("006,gel", "006,vehicle"),
        ],
        "subjects.csv: arm 'gel' must have at least one subject; got none in column 'arm'. Correct the data, or take "
        "the "
        "arm out of the plan.",
    ),
    "arm with one subject": (
        [("007,gel", "007,vehicle"), ("001,gel", "001,vehicle"), ("004,gel", "004,vehicle")],
        "subjects.csv: arm 'gel' must have at least 2 subjects; got 1 in column 'arm'.",
    ),
    "empty stratum": (
        [("007,gel,A,F", "007,gel,A,")],
        "subjects.csv, line 2: column 'sex' must hold the stratum each subject was randomised in; got an empty cell. "
        "Fill in the stratum as randomised.",
    ),
    "unknown level": (
        [("fair,1", "Fare,1")],
        "subjects.csv, line 3: column 'sleep' must hold one of the levels 'good', 'fair' or 'poor' (endpoint[2] "
        "\"Sleep\"); got 'Fare'. Did you mean 'fair'?",
    ),
    "neither 0 nor 1": (
        [("good,0", "good,2")],
        "subjects.csv, line 2: column 'rash' must hold 0 or 1 (endpoint[3] \"Rash\"); got '2'. Correct the cell, or "
        "name "
        "the event in the plan.",
    ),
    "text for 0 or 1": (
        [("good,0", "good,no"), ("fair,1", "fair,yes")],
        "subjects.csv, lines 2 and 3: column 'rash' must be a number (endpoint[3] \"Rash\"); got 'no' and "
        "'yes'. Write 0 and 1, or one word for the event, named in the plan, and one for no event.",
    ),
    "analysis set value absent": (
        [(",N,", ",Y,"), *[(",Y,", ",yes,")] * 8],
        "subjects.csv: column 'kept' must hold 'Y' for at least one subject (analysis_set[1] \"kept\"); got 'yes'.",
    ),
    "row too short": (
        [("007,gel,A,F,good,0,Y,1,1", "007,gel,A,F,good,0,Y,1")],
        "subjects.csv, line 2: a row must have as many cells as the header, 9; got 8. Check commas",
    ),
    "row too long": ([("007,gel,A,F", "007,gel,A, B,F")], "subjects.csv, line 2: a row must have as many cells"),
    "quotation mark open": (
        [("008,vehicle", '008,"vehicle')],
        "subjects.csv, line 9: a CSV row must be well formed; got a row that is not",
    ),
}


@pytest.mark.parametrize(("changes", "sentence"), SUBJECT_FAULTS.values(), ids=SUBJECT_FAULTS.keys())
def test_a_fault_of_the_subject_table_is_one_sentence(study, changes, sentence):
    with pytest.raises(DataError, match=re.escape(sentence)) as caught:
        study.assemble(subjects=tuple(changes))
    assert all(fault.endswith((".", "?")) for fault in caught.value.faults)


VISIT_FAULTS = {
    "missing key column": (
        [("visit,", "visits,")],
        "visits.csv: column 'visit' must exist (the visit of each row); got no such column. Did you mean 'visits'?",
    ),
    "missing value column": ([("change", "chg")], "visits.csv: column 'change' must exist (endpoint[1] \"Pain\")"),
    "unknown subject": (
        [("008,PAIN", "800,PAIN")],
        "visits.csv, line 9: every subject must be one of the randomised in the subject table; got '800'. Add them "
        "to the "
        "subject table, or remove their rows.",
    ),
    "lost leading zeros": ([("008,PAIN", "8,PAIN")], "visits.csv, line 9: every subject must be one of the randomised"),
    "empty subject": (
        [("008,PAIN", ",PAIN")],
        "visits.csv, line 9: column 'id' must hold each row's subject; got an empty cell.",
    ),
    "duplicate rows": (
        [("001,PAIN,W4,-1", "003,PAIN,W12,-1"), ("001,MOOD,W4,3", "001,PAIN,W12,3")],
        "visits.csv: a subject must have at most one row for parameter 'PAIN' at visit 'W12'; got subject '001' on "
        "lines 2 "
        "and 11; subject '003' on lines 4 and 10. Keep the row that the plan means.",
    ),
    "parameter never present": (
        [("PAIN,W12", "PAINN,W12")] * 8 + [("PAIN,W4", "PAINN,W4")],
        "visits.csv: parameter 'PAIN' must have rows (endpoint[1] \"Pain\"); got none. Did you mean 'PAINN'?",
    ),
    "visit never present": (
        [("PAIN,W12", "PAIN,Week 12")] * 8,
        "visits.csv: visit 'W12' must have rows for parameter 'PAIN' (endpoint[1] \"Pain\"); got none.",
    ),
    "text for a number": (
        [("-11", "much"), ("-13", '"1,5"'), ("-14", "<5")],
        "visits.csv, lines 2, 4 and 5: column 'change' must be a number (endpoint[1] \"Pain\"); got 'much', '1,5' and "
        "'<5'. Correct the cell, or leave it empty, NA or '.' if the value is missing.",
    ),
    "infinite": (
        [("-11", "inf"), ("-13", "-Infinity"), ("-14", "1e999")],
        "visits.csv, lines 2, 4 and 5: column 'change' must be a finite number (endpoint[1] \"Pain\"); got 'inf', "
        "'-Infinity' and '1e999'. Correct the cell, or leave it empty, NA or '.' if the value is missing.",
    ),
    "a word for missing that is not agreed": (
        [("-11", "NaN"), ("-13", "missing")],
        "visits.csv, lines 2 and 4: column 'change' must be a number (endpoint[1] \"Pain\"); got 'NaN' and 'missing'. "
        "Correct the cell, or leave it empty, NA or '.' if the value is missing.",
    ),
    "more rows than are shown": (
        [(f"-{number}\n", "x\n") for number in (11, 13, 14, 15, 16, 17, 18)],
        "visits.csv, lines 2, 4, 5, 6, 7 and 2 more: column 'change' must be a number",
    ),
    "arm without data": (
        [("-11", ""), ("-14", "NA"), ("-16", "."), ("-17", "")],
        'endpoint[1] "Pain" must have at least one value in each arm that family[1] "All" compares; got none in arm '
        "'gel'. Correct the data, or take the endpoint or the arm out of the family.",
    ),
}


@pytest.mark.parametrize(("changes", "sentence"), VISIT_FAULTS.values(), ids=VISIT_FAULTS.keys())
def test_a_fault_of_a_long_table_is_one_sentence(study, changes, sentence):
    with pytest.raises(DataError, match=re.escape(sentence)) as caught:
        study.assemble(visits=tuple(changes))
    assert all(fault.endswith((".", "?")) for fault in caught.value.faults)


PLAN_FAULTS = {
    "level that means missing": (
        [('"good", "fair"', '"good", "NA", "fair"')],
        "subjects.csv: a level must not be a sign for a missing value (endpoint[2] \"Sleep\"); got level 'NA'. Rename",
    ),
    "three values for a binary": (
        [('value = "rash"', 'value = "sleep"\nevent = "poor"')],
        "subjects.csv: column 'sleep' must hold the event 'poor' and at most one other value (endpoint[3] \"Rash\"); "
        "got "
        "'good' and 'fair' beside it. Write one word for no event, or correct the event in the plan.",
    ),
    "event in other letters": (
        [('value = "rash"', 'value = "kept"\nevent = "y"')],
        "must hold the event 'y' and at most one other value (endpoint[3] \"Rash\"); got 'Y' and 'N' beside it. Did "
        "you "
        "mean 'Y'?",
    ),
    "number sought in text": (
        [('kept = "Y"', "kept = 1")],
        "column 'kept' must be a number (analysis_set[1] \"kept\"); got 'Y' and 'N'.",
    ),
    "analysis set of nobody": (
        [('kept = "Y"', 'kept = "N", site = "B"')],
        "subjects.csv: analysis_set[1] \"kept\" must hold at least one subject; got none that meets all of kept = 'N', "
        "site = 'B'. Correct where.",
    ),
    "arm without data within the analysis set": (
        [('kept = "Y"', 'kept = "N"'), ('name = "All"', 'name = "All"\nanalysis_set = "kept"')],
        "got none in arm 'gel' within analysis set 'kept'.",
    ),
    "file missing": (
        [("visits.csv", "visit.csv")],
        "visit.csv: a data file must exist; got none at ",
    ),
    "file of another form": (
        [("visits.csv", "visits.xlsx")],
        "visits.xlsx: a data file must be .csv or .parquet; got '.xlsx'. Save it in one of these forms.",
    ),
    "empty block": (
        [("stratified", "blocks"), ('strata = ["site", "sex"]', 'block = "blocks"')],
        "column 'blocks' must exist (the block each subject was randomised in); got no such column. Did you mean "
        "'block'?",
    ),
}


@pytest.mark.parametrize(("changes", "sentence"), PLAN_FAULTS.values(), ids=PLAN_FAULTS.keys())
def test_a_plan_that_does_not_fit_the_data_is_one_sentence(study, changes, sentence):
    with pytest.raises(DataError, match=re.escape(sentence)) as caught:
        study.assemble(plan=tuple(changes))
    assert all(fault.endswith((".", "?")) for fault in caught.value.faults)


@pytest.mark.parametrize("role", ["block", "set"])
def test_an_empty_block_or_set_is_a_fault(study, role):
    scheme = {"block": "blocks", "set": "matched sets"}[role]
    sentence = f"line 2: column 'site' must hold the {role} each subject was randomised in; got an empty cell"
    with pytest.raises(DataError, match=re.escape(sentence)):
        study.assemble(
            plan=(("stratified", scheme), ('strata = ["site", "sex"]', f'{role} = "site"')),
            subjects=(("007,gel,A", "007,gel,"),),
        )


FILE_FAULTS = {
    "empty": (b"", "subjects.csv: a data file must not be empty; got no content. Check the export."),
    "white space only": (b"\xef\xbb\xbf \n\n", "subjects.csv: a data file must not be empty; got no content."),
    "header only": (b"id,arm\n\n", "subjects.csv: a data file must have at least one row below its header; got none."),
    "not UTF-8": (b"id,arm\n1,\xe9\n", "subjects.csv, line 2: a CSV file must be UTF-8 text; got a byte that is not."),
    "semicolons": (
        b"id;arm\n1;gel\n",
        "subjects.csv, line 1: cells must be separated by commas; got semicolons. Export with commas and decimal "
        "points.",
    ),
}


@pytest.mark.parametrize(("raw", "sentence"), FILE_FAULTS.values(), ids=FILE_FAULTS.keys())
def test_an_unusable_file_is_one_sentence(study, raw, sentence):
    study.assemble()
    (study.folder / "subjects.csv").write_bytes(raw)
    with pytest.raises(DataError, match=re.escape(sentence)) as caught:
        study.again()
    assert len(caught.value.faults) == 1


def test_a_folder_is_no_data_file(study):
    study.assemble()
    (study.folder / "subjects.csv").unlink()
    (study.folder / "subjects.csv").mkdir()
    with pytest.raises(
        DataError, match=r"subjects\.csv: a data file must be a file; got a folder\. Name the file in it\."
    ):
        study.again()


def test_a_broken_parquet_file_is_one_sentence(study):
    pytest.importorskip("pyarrow")
    study.assemble()
    (study.folder / "subjects.parquet").write_bytes(b"no parquet")
    with pytest.raises(DataError, match=r"subjects\.parquet: a \.parquet file must be readable as Parquet; got '"):
        study.again(plan=(("subjects.csv", "subjects.parquet"),))


def test_a_missing_file_suggests_the_nearest_in_its_folder(study):
    with pytest.raises(DataError, match=r"Did you mean 'visits\.csv'\?"):
        study.assemble(plan=(("visits.csv", "visit.csv"),))


def test_one_parameter_in_two_long_tables_is_a_fault(study, sound_files):
    (study.folder / "more.csv").write_text(sound_files["visits.csv"])
    sentence = "visits.csv and more.csv: parameter 'PAIN' at visit 'W12' must stand in one long table"
    with pytest.raises(DataError, match=re.escape(sentence)):
        study.assemble(plan=(("[randomisation]", '[[data.long]]\nfile = "more.csv"\n[randomisation]'),))


def test_an_unreadable_long_table_does_not_make_its_parameters_absent(study):
    """One cause, one fault."""
    study.assemble()
    (study.folder / "visits.csv").write_bytes(b"")
    with pytest.raises(DataError, match="must not be empty") as caught:
        study.again()
    assert len(caught.value.faults) == 1


def test_faults_of_all_tables_are_told_at_once(study):
    with pytest.raises(DataError, match="randomised") as caught:
        study.assemble(
            subjects=(("007,gel", "007,gell"), ("A,M,poor", "A,M,bad"), ("B,F,good,0", ",F,good,7")),
            visits=(("-12.5", "x"), ("008,PAIN", "800,PAIN"), ("001,PAIN,W4", "002,PAIN,W12")),
        )
    assert len(caught.value.faults) == 7


def test_line_numbers_count_blank_lines_and_cells_of_several_lines(study):
    with pytest.raises(DataError, match=r"subjects\.csv, line 6: column 'arm'"):
        study.assemble(subjects=(("007,gel,A,F,good,0,Y,1,1\n003,veh", '\n\n007,gel,A,"F\n",good,0,Y,1,1\n003,ve'),))
