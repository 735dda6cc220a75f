"""What a sound study becomes: order, labels, cells, values, missing data, analysis sets."""

from __future__ import annotations

import hashlib

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_array_equal

from mtest.errors import DataError


def values(trial, name):
    return next(endpoint.values for endpoint in trial.endpoints if endpoint.name == name)


def test_subjects_stand_in_the_order_of_their_identifiers_which_stay_text(study):
    trial, _ = study.assemble()
    assert trial.subject_ids == ("001", "002", "003", "004", "005", "006", "007", "008")
    assert_array_equal(trial.arm, [1, 0, 0, 1, 0, 1, 1, 0])
    assert_array_equal(values(trial, "Pain"), [-11, -12.5, -13, -14, -15, -16, -17, -18])


def test_the_order_of_rows_and_columns_in_the_files_does_not_matter(study, sound_files):
    expected, _ = study.assemble()
    for name, text in sound_files.items():
        header, *rows = text.splitlines()
        turned = [",".join(reversed(line.split(","))) for line in (header, *reversed(rows))]
        (study.folder / name).write_text("\n".join(turned) + "\n")
    got, _ = study.again()
    assert got.subject_ids == expected.subject_ids
    for name in ("arm", "stratum", "cell"):
        assert_array_equal(getattr(got, name), getattr(expected, name))
    for mine, theirs in zip(got.endpoints, expected.endpoints):
        assert_array_equal(mine.values, theirs.values)


def test_strata_are_the_combinations_of_their_columns(study):
    trial, _ = study.assemble()
    assert trial.stratum_names == ("A / F", "A / M", "B / F", "B / M")
    assert_array_equal(trial.stratum, [1, 1, 0, 2, 2, 3, 0, 3])
    assert_array_equal(trial.cell, trial.stratum)


def test_strata_whose_joined_names_coincide_stay_apart(study):
    """'A / F' with 'x' and 'A' with 'F / x' read the same, but are different strata."""
    trial, _ = study.assemble(
        subjects=(
            ("007,gel,A,F", "007,gel,A / F,x"),
            ("003,vehicle,A,F", "003,vehicle,A / F,x"),
            ("001,gel,A,M", "001,gel,A,F / x"),
            ("002,vehicle,A,M", "002,vehicle,A,F / x"),
        )
    )
    assert len(trial.stratum_names) == 4
    assert trial.stratum[6] == trial.stratum[2] != trial.stratum[0] == trial.stratum[1]


def test_the_complete_scheme_has_one_stratum_and_one_cell(study):
    trial, _ = study.assemble(plan=(("stratified", "complete"), ('strata = ["site", "sex"]', "")))
    assert trial.stratum_names == ("all subjects",)
    assert not trial.stratum.any()
    assert not trial.cell.any()


def test_block_numbers_may_start_again_in_each_stratum(study):
    trial, _ = study.assemble(
        plan=(("stratified", "blocks"), ('strata = ["site", "sex"]', 'strata = ["site"]\nblock = "block"'))
    )
    assert trial.stratum_names == ("A", "B")
    assert_array_equal(trial.stratum, [0, 0, 0, 1, 1, 1, 0, 1])
    assert_array_equal(trial.cell, [0, 0, 0, 1, 1, 2, 0, 2])


def test_blocks_without_strata_leave_one_stratum(study):
    trial, _ = study.assemble(plan=(("stratified", "blocks"), ('strata = ["site", "sex"]', 'block = "block"')))
    assert_array_equal(trial.cell, [0, 0, 0, 0, 0, 1, 0, 1])
    assert not trial.stratum.any()


def test_a_matched_set_is_stratum_and_cell(study):
    trial, _ = study.assemble(plan=(("stratified", "matched sets"), ('strata = ["site", "sex"]', 'set = "site"')))
    assert trial.stratum_names == ("A", "B")
    assert_array_equal(trial.stratum, [0, 0, 0, 1, 1, 1, 0, 1])
    assert_array_equal(trial.cell, trial.stratum)


def test_levels_become_numbers_in_their_order(study):
    trial, _ = study.assemble()
    assert_array_equal(values(trial, "Sleep"), [2, 0, 1, 1, 0, 2, 0, 2])


def test_an_ordinal_endpoint_without_levels_is_read_as_numbers(study):
    trial, _ = study.assemble(plan=(('value = "sleep"\nlevels = ["good", "fair", "poor"]', 'value = "dose"'),))
    assert_array_equal(values(trial, "Sleep"), [2, 2, 1, 1, 1, 2, 1, 2])


EVENTS = {
    "text": ('value = "kept"\nevent = "N"', [0, 1, 0, 0, 0, 0, 0, 0]),
    "number": ('value = "dose"\nevent = 2', [1, 1, 0, 0, 0, 1, 0, 1]),
    "fraction": ('value = "dose"\nevent = 1.0', [0, 0, 1, 1, 1, 0, 1, 0]),
}


@pytest.mark.parametrize(("event", "expected"), EVENTS.values(), ids=EVENTS.keys())
def test_the_event_of_a_binary_endpoint_counts_as_one(study, event, expected):
    """A text event is compared as text, a number as a number: 2 is also 2.0."""
    trial, _ = study.assemble(plan=(('value = "rash"', event),))
    assert_array_equal(values(trial, "Rash"), expected)


def test_an_event_true_is_the_text_true(study):
    """Capitals do not matter, because programs write true in several ways."""
    spelled = ((",0,Y", ",FALSE,Y"), (",0,N", ",false,N"), (",0,Y", ",False,Y"), *[(",1,Y", ",True,Y")] * 5)
    trial, _ = study.assemble(plan=(('value = "rash"', 'value = "rash"\nevent = true'),), subjects=spelled)
    assert_array_equal(values(trial, "Rash"), [1, 0, 1, 1, 0, 1, 0, 1])


@pytest.mark.parametrize("token", ["", "NA", ".", "  "])
def test_missing_tokens_are_missing_values(study, token):
    trial, _ = study.assemble(visits=(("-11", token),), subjects=((",poor,1,Y,1", f",{token},{token},Y,1"),))
    for name in ("Pain", "Sleep", "Rash"):
        assert_array_equal(np.isnan(values(trial, name)), [True] + [False] * 7, err_msg=name)


def test_a_subject_without_a_row_in_the_long_table_is_kept_with_a_missing_value(study):
    trial, _ = study.assemble(visits=(("001,PAIN,W12,-11\n", ""),))
    assert_array_equal(np.isnan(values(trial, "Pain")), [True] + [False] * 7)
    assert len(trial.subject_ids) == 8


def test_na_may_be_an_arm_or_a_stratum(study):
    """The tokens for missing values hold for values only: NA may stand for North America."""
    trial, _ = study.assemble(subjects=(("007,gel,A,F", "007,gel,NA,F"), ("003,vehicle,A,F", "003,vehicle,NA,F")))
    assert "NA / F" in trial.stratum_names


WORST = {
    "ordinal, lower better": ("Sleep", 'levels = ["good", "fair", "poor"]\nbetter = "lower"', 3.0),
    "ordinal, higher better": ("Sleep", 'levels = ["good", "fair", "poor"]\nbetter = "higher"', -1.0),
}


@pytest.mark.parametrize(("name", "new", "filled"), WORST.values(), ids=WORST.keys())
def test_worst_score_lies_beyond_the_worst_observed(study, name, new, filled):
    old = 'levels = ["good", "fair", "poor"]\nbetter = "lower"'
    trial, _ = study.assemble(plan=((old, new + '\nmissing = "worst-score"'),), subjects=((",poor,1,Y,1", ",,1,Y,1"),))
    sleep = trial.endpoints[1]
    assert sleep.values[0] == filled
    assert_array_equal(sleep.n_filled, [0, 1])


@pytest.mark.parametrize(("better", "filled"), [("lower", 1.0), ("higher", 0.0)])
def test_worst_score_of_a_binary_endpoint_is_the_worse_outcome(study, better, filled):
    trial, _ = study.assemble(
        plan=(('value = "rash"\nbetter = "lower"', f'value = "rash"\nbetter = "{better}"\nmissing = "worst-score"'),),
        subjects=((",fair,1,Y", ",fair,,Y"),),
    )
    assert values(trial, "Rash")[2] == filled
    assert_array_equal(trial.endpoints[2].n_filled, [1, 0])


def test_worst_score_of_a_ranked_continuous_endpoint(study):
    trial, _ = study.assemble(
        plan=(('better = "lower"', 'better = "lower"\nstatistic = "rank"\nmissing = "worst-score"'),),
        visits=(("-18", ""),),
    )
    assert values(trial, "Pain")[7] == -11 + 1


def test_worst_score_serves_an_arm_without_any_value(study):
    """An arm that is missing throughout is not without data where the rule gives it values."""
    changes = [(f"{subject},PAIN,W12,-1{subject[-1]}\n", "") for subject in ("001", "004", "006", "007")]
    rank = (('better = "lower"', 'better = "lower"\nstatistic = "rank"\nmissing = "worst-score"'),)
    trial, _ = study.assemble(plan=rank, visits=tuple(changes))
    assert_array_equal(trial.endpoints[0].n_filled, [0, 4])


def test_worst_score_of_nothing_observed_is_a_fault(study):
    changes = [(f"-{number}", "") for number in ("11", "12.5", "13", "14", "15", "16", "17", "18")]
    rank = (('better = "lower"', 'better = "lower"\nstatistic = "rank"\nmissing = "worst-score"'),)
    with pytest.raises(DataError, match=r"column 'change' must hold at least one value for .*; got none"):
        study.assemble(plan=rank, visits=tuple(changes))


def test_available_fills_nothing(study):
    trial, _ = study.assemble(visits=(("-18", ""),))
    assert np.isnan(values(trial, "Pain")[7])
    assert_array_equal(trial.endpoints[0].n_filled, [0, 0])


def test_the_statistic_of_the_kind_is_the_default(study):
    trial, _ = study.assemble()
    assert [endpoint.statistic for endpoint in trial.endpoints] == ["welch", "rank", "score"]
    assert (trial.endpoints[0].unit, trial.endpoints[0].group) == ("mm", "Pain")


SETS = {
    "text": ('where = { kept = "Y" }', [1, 0, 1, 1, 1, 1, 1, 1]),
    "number, also written 2.0": ("where = { dose = 2 }", [1, 1, 0, 0, 0, 1, 0, 1]),
    "both": ('where = { kept = "Y", dose = 2 }', [1, 0, 0, 0, 0, 1, 0, 1]),
    "a number as text is compared as text": ('where = { dose = "2" }', [1, 1, 0, 0, 0, 0, 0, 0]),
}


@pytest.mark.parametrize(("where", "expected"), SETS.values(), ids=SETS.keys())
def test_an_analysis_set_holds_those_whose_columns_hold_the_values(study, where, expected):
    trial, _ = study.assemble(plan=(('where = { kept = "Y" }', where),))
    assert_array_equal(trial.sets["kept"], np.array(expected, bool))
    assert len(trial.subject_ids) == 8


def test_arrays_are_frozen(study):
    trial, _ = study.assemble()
    arrays = [trial.arm, trial.stratum, trial.cell, *trial.sets.values()]
    for array in [*arrays, *(e.values for e in trial.endpoints), *(e.n_filled for e in trial.endpoints)]:
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 0


def test_index_arrays_have_the_platform_index_type(study):
    trial, _ = study.assemble()
    assert trial.arm.dtype == trial.stratum.dtype == trial.cell.dtype == np.intp


def test_hashes_are_of_the_files_bytes(study):
    _, hashes = study.assemble()
    assert hashes == {
        name: hashlib.sha256((study.folder / name).read_bytes()).hexdigest() for name in ("subjects.csv", "visits.csv")
    }


def test_a_byte_order_mark_and_windows_line_ends_are_read(study, sound_files):
    for name, text in sound_files.items():
        (study.folder / name).write_bytes(b"\xef\xbb\xbf" + text.replace("\n", "\r\n").encode())
    assert study.again()[0].subject_ids[0] == "001"


def test_parquet_gives_the_same_trial_as_csv(study, sound_files):
    """Numbers, booleans and gaps of typed columns read like the text of a CSV file."""
    pytest.importorskip("pyarrow")
    expected, _ = study.assemble(visits=(("-18", ""),))
    frame = pd.read_csv(study.folder / "subjects.csv", dtype={"id": str})
    frame.to_parquet(study.folder / "subjects.parquet")
    pd.read_csv(study.folder / "visits.csv", dtype={"id": str}).to_parquet(study.folder / "visits.parquet")
    got, hashes = study.again(plan=(("subjects.csv", "subjects.parquet"), ("visits.csv", "visits.parquet")))
    assert set(hashes) == {"subjects.parquet", "visits.parquet"}
    assert got.subject_ids == expected.subject_ids
    for mine, theirs in zip(got.endpoints, expected.endpoints):
        assert_array_equal(mine.values, theirs.values)


def test_numbers_are_read_to_the_last_bit(study):
    trial, _ = study.assemble(visits=(("-11\n", "0.1234567890123456789e-3\n"), ("-12.5", "+.5")))
    assert values(trial, "Pain")[0] == 0.1234567890123456789e-3
    assert values(trial, "Pain")[1] == 0.5


def test_two_long_tables_serve_endpoints_of_either(study):
    (study.folder / "more.csv").write_text("who,what,when,score\n001,MOOD,W12,1\n002,MOOD,W12,4\n")
    trial, _ = study.assemble(
        plan=(
            (
                "[randomisation]",
                '[[data.long]]\nfile = "more.csv"\nsubject = "who"\nparameter = "what"\nvisit = "when"\n'
                "[randomisation]",
            ),
            ('value = "rash"', 'value = { parameter = "MOOD", visit = "W12", column = "score" }'),
            ('kind = "binary"', 'kind = "continuous"'),
        )
    )
    assert_array_equal(values(trial, "Rash")[:2], [1, 4])


def test_a_sound_study_raises_no_fault_and_few_warnings(study):
    trial, _ = study.assemble()
    assert trial.warnings == ()


def test_no_file_is_needed_but_those_of_the_plan(study):
    study.assemble()
    (study.folder / "visits.csv").unlink()
    with pytest.raises(DataError, match=r"visits\.csv: a data file must exist"):
        study.again()
