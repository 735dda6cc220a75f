"""What a fault of the plan tells its author to write, and that one slip is one fault."""

from __future__ import annotations

import re

import pytest

from mtest.errors import PlanError
from mtest.plan.read import parse_plan

ALL = 'comparisons = "each vs reference"'

REMEDIES = {
    "alpha as percent": ("[data]", "alpha = 5\n[data]", "study.alpha must lie .*; got 5. Did you mean 0.05?"),
    "alpha as a percent with a fraction": (ALL, f"{ALL}\nalpha = 2.5", "got 2.5. Did you mean 0.025?"),
    "alpha as text": ("[data]", 'alpha = "0.05"\n[data]', "got '0.05'. Write 0.05 without quotation marks."),
    "alpha not a number": ("[data]", "alpha = nan\n[data]", "got nan. Write a level such as 0.05."),
    "alpha below zero": ("[data]", "alpha = -1\n[data]", "got -1. Write a level such as 0.05."),
    "alpha one": ("[data]", "alpha = 1\n[data]", "got 1. Write a level such as 0.05."),
    "seed as text": ("seed = 1", 'seed = "17"', "draws.seed must be a whole number; got '17'. Write 17."),
    "seed negative": ("seed = 1", "seed = -1", "got -1. Write a whole number of your choice, such as 1."),
    "seed with a fraction": ("seed = 1", "seed = 1.5", "got 1.5. Write a whole number of your choice, such as 1."),
    "seed absent": ("seed = 1", "", "got none. Add seed = a whole number of your choice."),
    "too few draws": ("seed = 1", "seed = 1\nat_least = 9", "got 9. Write 99 or more."),
    "draws with a point": ("seed = 1", "seed = 1\nat_least = 1e4", "got 10000.0. Write 10000."),
    "text for a list": ('["site"]', '"site"', "randomisation.strata must be a list; got 'site'. Write [\"site\"]."),
    "number for text": ('subject = "id"', "subject = 7", 'data.subject .*; got 7. Write "7".'),
    "empty text": ('name = "Pain"', 'name = ""', "got empty text. Fill it in."),
    "one arm": ('["vehicle", "low", "high"]', '["vehicle"]', "got ['vehicle']. Add the others."),
    "one endpoint as text": ('"all"', '"Pain"', 'got \'Pain\'. Write ["Pain"] or "all".'),
    "one endpoint that resembles all": ('"all"', '"Fall"', 'got \'Fall\'. Write ["Fall"] or "all".'),
    "all in other letters": ('"all"', '"ALL"', "got 'ALL'. Did you mean 'all'?"),
    "flat comparisons": (ALL, 'comparisons = ["high", "low"]', '["high", "low"]].'),
    "comparisons of nothing": (ALL, "comparisons = []", "got []. Write each pair in brackets of its own"),
    "comparisons of no known form": (ALL, 'comparisons = "xyz"', "got 'xyz'. Choose one of these."),
    "a word unlike any": ('kind = "binary"', 'kind = "xyz"', "got 'xyz'. Choose one of these."),
    "reference unlike any arm": ('reference = "vehicle"', 'reference = "xyz"', "got 'xyz'. Correct the name, or add"),
}


def pattern(sentence: str) -> str:
    """Return the sentence as a regular expression in which only .* is special."""
    return ".*".join(re.escape(part) for part in sentence.split(".*"))


@pytest.mark.parametrize(("old", "new", "sentence"), REMEDIES.values(), ids=REMEDIES.keys())
def test_a_fault_of_form_says_what_to_write(plan_text, old, new, sentence):
    with pytest.raises(PlanError, match=pattern(sentence)):
        parse_plan(plan_text((old, new)), "p.toml")


def test_what_is_advised_for_flat_comparisons_is_a_plan(plan_text):
    assert parse_plan(plan_text((ALL, 'comparisons = [["high", "low"]]')), "p.toml").family[0].comparisons


@pytest.mark.parametrize(
    ("reference", "example"),
    [
        ('reference = "low"', '[["2 %", "low"]]'),
        ("", '[["2 %", "placebo"]]'),
        ("reference = 3", '[["2 %", "placebo"]]'),
    ],
)
def test_the_example_of_comparisons_names_arms_of_the_plan_itself(plan_text, reference, example):
    changes = [('["vehicle", "low", "high"]', '["placebo", "low", "2 %"]'), ('reference = "vehicle"', reference)]
    with pytest.raises(PlanError, match=re.escape(f"a list of pairs of arms such as {example}; got 'xyz'.")):
        parse_plan(plan_text(*changes, (ALL, 'comparisons = "xyz"')), "p.toml")


@pytest.mark.parametrize("arms", ['"vehicle"', "[1, 2]", '["vehicle", "vehicle"]'])
def test_comparisons_have_no_example_where_the_plan_names_no_two_arms(plan_text, arms):
    changes = [('arms = ["vehicle", "low", "high"]', f"arms = {arms}"), (ALL, 'comparisons = "xyz"')]
    with pytest.raises(PlanError, match="or a list of pairs of arms; got 'xyz'"):
        parse_plan(plan_text(*changes), "p.toml")


TWICE = {
    "key": (
        "a = 1\na = 2\n",
        "a plan must have each key of a section once; got one again at line 2, column 6: `a = 2`.",
    ),
    "key of an endpoint": (
        '[[endpoint]]\nname = "a"\nname = "b"\n',
        'line 3, column 11: `name = "b"`. Remove one of the two, or write [[endpoint]] above it to begin another.',
    ),
    "key of a family": ("[[family]]\na = 1\na = 2\n", "or write [[family]] above it to begin another."),
    "key of a section": ("[study]\na = 1\na = 2\n", "`a = 2`. Remove one of the two."),
    "key in braces": ("v = { a = 1, a = 2 }\n", "`v = { a = 1, a = 2 }`. Remove one of the two."),
    "key at the end of the file": ("a = 1\na = 2", "got one again at "),
    "endpoint": (
        "[endpoint]\na = 1\n[endpoint]\na = 2\n",
        "the section [endpoint] once; got it again at line 3, column 10: `[endpoint]`. Write [[endpoint]], each time.",
    ),
    "endpoint after a sound one": ("[[endpoint]]\na = 1\n[endpoint]\na = 2\n", "Write [[endpoint]], each time."),
    "endpoint before a sound one": ("[endpoint]\na = 1\n[[endpoint]]\na = 2\n", "Write [[endpoint]], each time."),
    "family": ("[family]\na = 1\n[family]\na = 2\n", "Write [[family]], each time."),
    "analysis set": ("[analysis_set]\na = 1\n[analysis_set]\na = 2\n", "Write [[analysis_set]], each time."),
    "long table": ("[data.long]\na = 1\n[data.long]\na = 2\n", "Write [[data.long]], each time."),
    "section": ("[study]\na = 1\n[study]\nb = 2\n", "column 7: `[study]`. Put its keys under the first."),
}


@pytest.mark.parametrize(("text", "sentence"), TWICE.values(), ids=TWICE.keys())
def test_what_stands_twice_is_one_sentence(text, sentence):
    with pytest.raises(PlanError, match=re.escape(sentence)) as caught:
        parse_plan(text, "p.toml")
    assert len(caught.value.faults) == 1


@pytest.mark.parametrize("section", ["endpoint", "family", "analysis_set", "data.long"])
def test_one_table_for_several_is_told_to_double_its_brackets(plan_text, section):
    text = plan_text()
    parts = text.split(f"[[{section}]]")
    kept = parts[-1] if section != "analysis_set" else parts[1]
    with pytest.raises(PlanError, match=re.escape(f"Write [[{section}]] instead of [{section}].")):
        parse_plan(f"{parts[0]}[{section}]{kept}", "p.toml")


MISSPELT = {
    "key": ('event = "yes"\nbetter', 'event = "yes"\nbeter', "unknown key 'beter' .* Did you mean 'better'?"),
    "optional section": ("[[analysis_set]]", "[[analysis_sett]]", "unknown key 'analysis_sett' .* 'analysis_set'?"),
    "required section": ("[draws]", "[drawz]", "unknown key 'drawz' at the top level.* Did you mean 'draws'?"),
}


@pytest.mark.parametrize(("old", "new", "sentence"), MISSPELT.values(), ids=MISSPELT.keys())
def test_a_misspelt_key_is_not_also_a_missing_one(plan_text, old, new, sentence):
    with pytest.raises(PlanError, match=pattern(sentence)) as caught:
        parse_plan(plan_text((old, new)), "p.toml")
    assert len(caught.value.faults) == 1


def test_a_missing_key_is_told_beside_an_unknown_one_that_is_not_near(plan_text):
    with pytest.raises(PlanError, match="unknown key 'colour'") as caught:
        parse_plan(plan_text(('event = "yes"\nbetter = "lower"', 'colour = "red"')), "p.toml")
    assert any("must have the key 'better'" in fault for fault in caught.value.faults)
