"""The rules that bind several keys: each broken rule is one sentence that says what to do."""

from __future__ import annotations

import re

import pytest

from mtest.errors import PlanError
from mtest.plan.read import parse_plan

STRATIFIED = 'scheme = "stratified"'
STRATA = 'strata = ["site"]'
PAIRS = '[["high", "low"], ["high", "vehicle"]]'
ALL = 'comparisons = "each vs reference"'

RULE_FAULTS = {
    "endpoint named twice": (
        [('name = "Sleep"', 'name = "Pain"')],
        'endpoint[2] "Pain".name must differ from every other endpoint\'s; got the name of endpoint[1] again. Rename',
    ),
    "family named twice": ([('name = "Some"', 'name = "All"')], 'family[2] "All".name must differ from every other'),
    "analysis set named twice": (
        [("[[family]]", '[[analysis_set]]\nname = "per protocol"\nwhere = { a = 1 }\n[[family]]')],
        'analysis_set[2] "per protocol".name must differ',
    ),
    "arm named twice": (
        [('"low", "high"', '"low", "high", "low"')],
        "randomisation.arms must name each arm once; got 'low' 2 times. Remove the others.",
    ),
    "arm with white space": (
        [('"low", "high"', '"low", "high", "top "')],
        "randomisation.arms must not begin or end with white space, which is stripped from the data; got 'top '. "
        "Write 'top'.",
    ),
    "reference is no arm": (
        [('reference = "vehicle"', 'reference = "vehikle"')],
        "randomisation.reference must be one of randomisation.arms, 'vehicle', 'low' or 'high'; got 'vehikle'. "
        "Did you mean 'vehicle'?",
    ),
    "each vs reference without reference": (
        [('reference = "vehicle"\n', "")],
        "family[1] \"All\".comparisons must have a reference arm to be 'each vs reference'; got no "
        "randomisation.reference. Add reference = one of 'vehicle', 'low' or 'high' to [randomisation].",
    ),
    "pair names no arm": (
        [('["high", "low"]', '["high", "lowe"]')],
        "family[2] \"Some\".comparisons[1] must name two of randomisation.arms, 'vehicle', 'low' and 'high'; "
        "got 'lowe'. Did you mean 'low'?",
    ),
    "pair of one arm": (
        [('["high", "low"]', '["high", "high"]')],
        "family[2] \"Some\".comparisons[1] must name two different arms; got 'high' twice.",
    ),
    "pair twice": (
        [('["high", "vehicle"]]', '["high", "low"]]')],
        'family[2] "Some".comparisons[2] must be another pair of arms, in either order, than every pair before; got '
        "['high', 'low'], the arms of comparisons[1] again. Remove one.",
    ),
    "pair reversed": (
        [('["high", "vehicle"]]', '["low", "high"]]')],
        "got ['low', 'high'], the arms of comparisons[1] again.",
    ),
    "family of an unknown endpoint": (
        [('["Pain", "Sleep"]', '["Pain", "Slep"]')],
        "family[2] \"Some\".endpoints must name endpoints of the plan; got 'Slep'. Did you mean 'Sleep'?",
    ),
    "family of an endpoint unlike any": (
        [('["Pain", "Sleep"]', '["Pain", "Grip"]')],
        "got 'Grip'. The plan has 'Pain', 'Sleep' and 'Rash'.",
    ),
    "family with an endpoint twice": (
        [('["Pain", "Sleep"]', '["Pain", "Pain"]')],
        "family[2] \"Some\".endpoints must name each endpoint once; got 'Pain' 2 times. Remove the others.",
    ),
    "unknown analysis set": (
        [('analysis_set = "per protocol"', 'analysis_set = "per-protocol"')],
        "family[2] \"Some\".analysis_set must name an analysis set of the plan, which has 'per protocol'; got "
        "'per-protocol'. Did you mean 'per protocol'?",
    ),
    "analysis set where there is none": (
        [('[[analysis_set]]\nname = "per protocol"\nwhere = { kept = "Y" }\n', "")],
        "which has no [[analysis_set]]; got 'per protocol'. Add it, or leave the key out for all randomised subjects.",
    ),
    "stratified without strata": (
        [(STRATA, "")],
        "randomisation.strata must be given under scheme 'stratified'; got none. Name the columns that hold the "
        "strata.",
    ),
    "blocks without block": (
        [(STRATIFIED, 'scheme = "blocks"')],
        "randomisation.block must be given under scheme 'blocks'; got none. Name the column that holds the block.",
    ),
    "matched sets without set": (
        [(STRATIFIED, 'scheme = "matched sets"'), (STRATA, "")],
        "randomisation.set must be given under scheme 'matched sets'; got none. Name the column that holds the set.",
    ),
    "strata under complete": (
        [(STRATIFIED, 'scheme = "complete"')],
        "randomisation.strata must not be given under scheme 'complete', which would ignore it; got ['site']. "
        "Remove it, or state the scheme that was used: 'stratified' or 'blocks'.",
    ),
    "block under stratified": (
        [(STRATA, STRATA + '\nblock = "block"')],
        "randomisation.block must not be given under scheme 'stratified', which would ignore it; got 'block'. "
        "Remove it, or state the scheme that was used: 'blocks'.",
    ),
    "set under blocks": (
        [(STRATIFIED, 'scheme = "blocks"'), (STRATA, 'block = "b"\nset = "s"')],
        "randomisation.set must not be given under scheme 'blocks', which would ignore it; got 's'.",
    ),
    "strata under matched sets": (
        [(STRATIFIED, 'scheme = "matched sets"'), (STRATA, STRATA + '\nset = "s"')],
        "randomisation.strata must not be given under scheme 'matched sets'",
    ),
    "column with two roles": (
        [(STRATA, 'strata = ["site", "arm"]')],
        "randomisation must give each column one role (subject, arm, stratum, block or set); got column 'arm' 2 times.",
    ),
    "draws out of order": (
        [("seed = 1", "seed = 1\nat_least = 5000\nat_most = 1000")],
        "draws.at_least must not exceed draws.at_most; got 5000 and 1000. Lower the first or raise the second.",
    ),
    "one-sided without alpha": (
        [(ALL, ALL + '\nalternative = "better"')],
        "family[1] \"All\".alpha must be stated where alternative is 'better', because a one-sided level is not the "
        "study's two-sided one; got none. Add alpha, for instance half of study.alpha.",
    ),
    "Hochberg on several pairs": (
        [(ALL, ALL + '\nprocedure = "Hochberg"')],
        "family[1] \"All\".procedure must not be 'Hochberg' where several pairs of arms are compared, because it "
        "needs a "
        "kind of positive dependence that pairwise comparisons do not guarantee; got 2 pairs. Choose 'Holm' or "
        "'step-down max-T', or state in why_valid why the dependence holds.",
    ),
    "Hommel on all pairs": (
        [(ALL, 'comparisons = "all pairs"\nprocedure = "Hommel"')],
        "must not be 'Hommel' where several pairs of arms are compared, because it needs a kind of positive dependence "
        "that pairwise comparisons do not guarantee; got 3 pairs.",
    ),
    "reason without use": (
        [(ALL, ALL + '\nwhy_valid = "because"')],
        "family[1] \"All\".why_valid must be given for 'Hochberg' and 'Hommel' only; got it with 'step-down max-T'.",
    ),
    "across pairs under all-arms": (
        [(ALL, ALL + '\nexchange = "all-arms"\nacross_pairs = "joint"')],
        "family[1] \"All\".across_pairs must not be given with exchange 'all-arms', where one relabelling serves all "
        "pairs; got 'joint'. Remove it, or write exchange = \"within-pair\".",
    ),
    "boole with p-values": (
        [('procedure = "Holm"', 'procedure = "Holm"\nacross_pairs = "boole"')],
        "family[2] \"Some\".across_pairs must be 'boole' with 'step-down max-T' or 'single-step max-T' only; got it "
        "with "
        "'Holm', which takes the pairs together by their p-values.",
    ),
    "rank for binary": (
        [('event = "yes"', 'event = "yes"\nstatistic = "rank"')],
        "endpoint[3] \"Rash\".statistic must be 'score' or 'difference' for kind 'binary'; got 'rank'. Leave the key "
        "out "
        "for 'score'.",
    ),
    "Welch for ordinal": (
        [("levels =", 'statistic = "welch"\nlevels =')],
        "endpoint[2] \"Sleep\".statistic must be 'rank' for kind 'ordinal'; got 'welch'.",
    ),
    "score for continuous": (
        [('column = "change" }', 'column = "change" }\nstatistic = "score"')],
        "endpoint[1] \"Pain\".statistic must be 'welch', 'pooled', 'difference', 'unscaled difference' or 'rank' for "
        "kind "
        "'continuous'; got 'score'.",
    ),
    "worst score of a mean": (
        [('column = "change" }', 'column = "change" }\nmissing = "worst-score"')],
        "endpoint[1] \"Pain\".missing must be 'available' for a continuous endpoint that is not ranked, because a "
        "worst "
        "score has a rank but no size; got 'worst-score'.",
    ),
    "levels of a binary": (
        [('event = "yes"', 'levels = ["no", "yes"]')],
        "endpoint[3] \"Rash\".levels must be given for kind 'ordinal' only; got it for 'binary'.",
    ),
    "event of an ordinal": (
        [('levels = ["good", "poor"]', 'event = "poor"')],
        "endpoint[2] \"Sleep\".event must be given for kind 'binary' only; got it for 'ordinal'.",
    ),
    "level twice": (
        [('["good", "poor"]', '["good", "poor", "good"]')],
        "endpoint[2] \"Sleep\".levels must name each level once, from lowest to highest; got 'good' 2 times.",
    ),
    "one level": ([('["good", "poor"]', '["good"]')], "levels must name at least two levels; got 'good' alone."),
    "parameter without visit": (
        [('visit = "W12", ', "")],
        'endpoint[1] "Pain".value must give both parameter and visit for a long table, or neither for the subject '
        "table; got parameter = 'PAIN' alone. Add visit, or remove parameter.",
    ),
    "visit without parameter": (
        [('parameter = "PAIN", ', "")],
        "got visit = 'W12' alone. Add parameter, or remove visit.",
    ),
    "long value without a table": (
        [('[[data.long]]\nfile = "visits.csv"\n', "")],
        'endpoint[1] "Pain".value must find its parameter and visit in a long table; got no [[data.long]].',
    ),
    "long table twice": (
        [("[randomisation]", '[[data.long]]\nfile = "visits.csv"\n[randomisation]')],
        "data.long must name each file once; got 'visits.csv' 2 times. Remove the others.",
    ),
}


@pytest.mark.parametrize(("changes", "sentence"), RULE_FAULTS.values(), ids=RULE_FAULTS.keys())
def test_a_broken_rule_is_one_sentence(plan_text, changes, sentence):
    with pytest.raises(PlanError, match=re.escape(sentence)) as caught:
        parse_plan(plan_text(*changes), "p.toml")
    for fault in caught.value.faults:
        assert fault.startswith("p.toml: ")
        assert fault.endswith((".", "?"))


def test_broken_rules_are_reported_together(plan_text):
    text = plan_text((STRATA, ""), ('["Pain", "Sleep"]', '["Pain", "Slep"]'), ("seed = 1", "seed = 1\nat_most = 100"))
    with pytest.raises(PlanError, match="strata") as caught:
        parse_plan(text, "p.toml")
    assert len(caught.value.faults) == 3


ALLOWED = {
    "blocks within strata": [(STRATIFIED, 'scheme = "blocks"'), (STRATA, STRATA + '\nblock = "b"')],
    "blocks alone": [(STRATIFIED, 'scheme = "blocks"'), (STRATA, 'block = "b"')],
    "complete": [(STRATIFIED, 'scheme = "complete"'), (STRATA, "")],
    "Hochberg with its reason": [(ALL, ALL + '\nprocedure = "Hochberg"\nwhy_valid = "shown in the appendix"')],
    "Hommel on one pair": [(PAIRS, '[["high", "low"]]'), ('procedure = "Holm"', 'procedure = "Hommel"')],
    "worst score of a rank": [
        ('column = "change" }', 'column = "change" }\nmissing = "worst-score"\nstatistic = "rank"')
    ],
    "worst score of an ordinal": [("levels =", 'missing = "worst-score"\nlevels =')],
    "worst score of a binary": [('event = "yes"', 'event = "yes"\nmissing = "worst-score"')],
    "boole with max-T": [(ALL, ALL + '\nacross_pairs = "boole"')],
    "one-sided with alpha": [(ALL, ALL + '\nalternative = "better"\nalpha = 0.025')],
    "the same pair in another family": [(ALL, f"comparisons = {PAIRS}")],
    "all pairs without a reference": [(ALL, 'comparisons = "all pairs"'), ('reference = "vehicle"\n', "")],
    "event false": [('event = "yes"', "event = false")],
}


@pytest.mark.parametrize("changes", ALLOWED.values(), ids=ALLOWED.keys())
def test_what_the_rules_allow_is_read(plan_text, changes):
    assert parse_plan(plan_text(*changes), "p.toml").study.title
