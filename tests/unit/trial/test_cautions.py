"""Warnings: what is allowed, but changes what the analysis can show."""

from __future__ import annotations

import pytest

MATCHED = (("stratified", "matched sets"), ('strata = ["site", "sex"]', 'set = "block"'))

WARNINGS = {
    "constant endpoint": (
        {
            "plan": (('value = "sleep"\nlevels = ["good", "fair", "poor"]', 'value = "block"'),),
            "subjects": ((",2,2.0", ",1,2.0"), (",2,2.0", ",1,2.0")),
        },
        'Endpoint "Sleep" is constant: every observed value is the same, so its p-values will be 1.',
    ),
    "nobody with the event": (
        {"subjects": tuple((old, old.replace("1", "0")) for old in ("fair,1", "poor,1", "fair,1", "poor,1", "poor,1"))},
        'Endpoint "Rash" is constant: nobody had the event, so its p-values will be 1.',
    ),
    "event never seen": (
        {
            "plan": (('value = "rash"', 'value = "rash"\nevent = "yes"'),),
            "subjects": ((",0,Y", ",1,Y"), (",0,N", ",1,N"), (",0,Y", ",1,Y")),
        },
        "Endpoint \"Rash\": the event 'yes' never occurs in the data, so its p-values will be 1; check its spelling.",
    ),
    "few events": (
        {"subjects": (("fair,1", "fair,0"),)},
        'Endpoint "Rash" has 4 events in all; with fewer than 5 a small p-value is hardly possible.',
    ),
    "stratum with one arm": (
        {"subjects": (("003,vehicle,A,F", "003,vehicle,A,M"),)},
        "Stratum 'A / F' (1 subject, all 'gel') holds one arm only and contributes nothing to the comparisons.",
    ),
    "strata with one arm": (
        {"subjects": (("003,vehicle,A,F", "003,vehicle,A,M"), ("008,vehicle,B,M", "008,vehicle,B,F"))},
        "2 strata, 'A / F' (1 subject, all 'gel'), 'B / M' (1 subject, all 'gel'), hold one arm only and contribute "
        "nothing to the comparisons.",
    ),
    "block with one arm": (
        {
            "plan": (("stratified", "blocks"), ('strata = ["site", "sex"]', 'block = "block"')),
            "subjects": (("008,vehicle,B,M,poor,1,Y,2", "008,vehicle,B,M,poor,1,Y,1"),),
        },
        "Block '2' (1 subject, all 'gel') holds one arm only and contributes nothing to the comparisons.",
    ),
    "set with one subject": (
        {"plan": MATCHED, "subjects": (("008,vehicle,B,M,poor,1,Y,2", "008,vehicle,B,M,poor,1,Y,1"),)},
        "Set '2' holds fewer than 2 subjects and contributes nothing to the comparisons.",
    ),
    "set with one arm": (
        {"plan": MATCHED, "subjects": (("008,vehicle", "008,gel"),)},
        "Set '2' (2 subjects, all 'gel') holds one arm only and contributes nothing to the comparisons.",
    ),
    "much missing": (
        {"visits": (("-11", ""), ("-12.5", ""))},
        'Endpoint "Pain" is missing for 25% of all subjects (2 of 8).',
    ),
    "missing apart": (
        {"visits": (("-11", ""),)},
        "Endpoint \"Pain\" is missing more often in arm 'gel' (25%) than in arm 'vehicle' (0%); the missingness may "
        "depend on the arm.",
    ),
    "white space": (
        {"subjects": (("007,gel", "007, gel"), ("008,vehicle", "008,vehicle "))},
        "subjects.csv: white space around 2 cells of column 'arm' was stripped before comparing labels.",
    ),
    "white space in a long table": (
        {"visits": (("001,PAIN", "001, PAIN"),)},
        "visits.csv: white space around 1 cell of column 'parameter' was stripped before comparing labels.",
    ),
}


@pytest.mark.parametrize(("changes", "sentence"), WARNINGS.values(), ids=WARNINGS.keys())
def test_what_deserves_caution_is_said(study, changes, sentence):
    trial, _ = study.assemble(**changes)
    assert sentence in trial.warnings


def test_missing_values_that_the_rule_fills_are_still_warned_of(study):
    trial, _ = study.assemble(
        plan=(('value = "rash"', 'value = "rash"\nmissing = "worst-score"'),),
        subjects=(("good,0,Y", "good,,Y"), ("poor,1,Y", "poor,,Y")),
    )
    assert any('Endpoint "Rash" is missing' in warning for warning in trial.warnings)


def test_at_most_five_cells_are_named(study, sound_files):
    header, *rows = sound_files["subjects.csv"].splitlines()
    lonely = [row.replace(",A,", f",S{number},").replace(",B,", f",S{number},") for number, row in enumerate(rows)]
    study.assemble()
    (study.folder / "subjects.csv").write_text("\n".join([header, *lonely]) + "\n")
    trial, _ = study.again()
    (warning,) = [warning for warning in trial.warnings if "one arm only" in warning]
    assert warning.startswith("8 strata, 'S0 / F' (1 subject, all 'gel'), ")
    assert " and 3 more, hold one arm only" in warning
