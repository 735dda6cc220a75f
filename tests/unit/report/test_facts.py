"""The display facts say what the numbers say."""

import math
from dataclasses import replace

import numpy as np
import pytest

from mtest.estimate.effects import estimate_effects
from mtest.report import facts as f
from mtest.report.method import describe_method, describe_run, list_references
from mtest.report.wording import ERROR_RATE, PROCEDURES, REFERENCES


def _with_procedure(result, procedure):
    return replace(result, families=(replace(result.families[0], procedure=procedure),))


def test_answer_counts_the_rejected_and_names_rate_level_and_sides(four_arms):
    rejected = [h for h in four_arms.families[0].hypotheses if h.rejected]
    answer = f.gather_facts(four_arms).families[0].answer
    assert 1 < len(rejected) < 42
    assert answer[0] == (
        f"{len(rejected)} of 42 hypotheses are rejected at a familywise error rate of 5\u00a0%, two-sided, "
        "by the step-down max-T procedure."
    )


def test_answer_tells_a_rejection_against_the_tested_arm_from_one_in_its_favour(four_arms):
    family = f.gather_facts(four_arms).families[0]
    harmed = [h for h in family.hypotheses if h.raw.rejected and h.direction == "worse"]
    assert [h.raw.endpoint for h in harmed] == ["Skin reaction at the site"]
    assert family.answer[1].endswith("and 1 with the tested arm worse.")


def test_answer_says_none_where_nothing_is_rejected(four_arms):
    family = four_arms.families[0]
    none = replace(family, hypotheses=tuple(replace(h, rejected=False) for h in family.hypotheses))
    answer = f.gather_facts(replace(four_arms, families=(none,))).families[0].answer
    assert len(answer) == 1
    assert answer[0].startswith("None of 42 hypotheses is rejected")


@pytest.mark.parametrize("procedure", ["Benjamini-Hochberg", "Benjamini-Yekutieli"])
def test_a_false_discovery_rate_is_not_called_familywise(four_arms, procedure):
    answer = f.gather_facts(_with_procedure(four_arms, procedure)).families[0].answer[0]
    assert "false discovery rate of 5\u00a0%" in answer
    assert "familywise" not in answer


def test_without_a_procedure_nothing_is_called_rejected_or_significant(four_arms):
    family = f.gather_facts(_with_procedure(four_arms, "none")).families[0]
    assert "No error rate is controlled" in family.answer[0]
    assert {h.decision for h in family.hypotheses} == {"nominal", "–"}


def test_every_procedure_of_the_plan_has_words():
    from typing import get_args

    from mtest.plan.records import Procedure

    assert set(get_args(Procedure)) == set(PROCEDURES)
    assert set(ERROR_RATE) < set(PROCEDURES)


def test_an_unsettled_decision_is_named_with_its_interval(two_families):
    (sentence,) = f.gather_facts(two_families).families[0].unsettled
    assert sentence.startswith("Pain on movement, change to week 12, 2 % vs vehicle: the adjusted p is 0.0495")
    assert "(0.047 to 0.053)" in sentence


def test_status_counts_what_is_not_settled_and_the_warnings(two_families, four_arms):
    assert f.gather_facts(two_families).status.endswith("1 decision NOT settled; 3 warnings.")
    assert f.gather_facts(four_arms).status.endswith("every decision settled; no warnings.")


@pytest.mark.parametrize(
    ("measure", "null", "estimate", "better", "direction"),
    [
        ("mean difference", 0.0, -2.0, "lower", "better"),
        ("mean difference", 0.0, -2.0, "higher", "worse"),
        ("P(better)", 0.5, 0.6, "lower", "better"),
        ("P(better)", 0.5, 0.4, "higher", "worse"),
        ("risk ratio", 1.0, 0.8, "higher", "worse"),
        ("mean difference", 0.0, 0.0, "higher", ""),
    ],
)
def test_direction_follows_the_measure_and_what_is_better(four_arms, measure, null, estimate, better, direction):
    h = four_arms.families[0].hypotheses[0]
    h = replace(h, better=better, effect=replace(h.effect, measure=measure, null=null, estimate=estimate))
    assert f.direction_of(h) == direction


def test_direction_falls_back_on_the_means_where_there_is_no_estimate(four_arms):
    h = four_arms.families[0].hypotheses[0]
    h = replace(h, better="higher", mean_arm=1.0, mean_reference=2.0, effect=replace(h.effect, estimate=math.nan))
    assert f.direction_of(h) == "worse"
    assert f.direction_of(replace(h, mean_arm=math.nan)) == ""


@pytest.mark.parametrize(
    ("method", "measure"),
    [
        ("Welch t", "mean difference, mm"),
        ("linear model with strata, t", "mean difference, mm, adjusted for strata"),
        ("Mantel-Haenszel, Sato variance", "mean difference, mm, adjusted for strata"),
    ],
)
def test_a_measure_says_where_it_is_adjusted_for_strata(four_arms, method, measure):
    effect = replace(four_arms.families[0].hypotheses[0].effect, method=method)
    assert f.measure_in_words(effect, "mm") == measure


@pytest.mark.parametrize("kind", ["continuous", "ordinal", "binary"])
@pytest.mark.parametrize("n_strata", [1, 2])
def test_an_effect_counts_as_stratified_where_there_was_more_than_one_stratum(kind, n_strata):
    """Told by the words of the method: one renamed in mtest.estimate must not lose its label."""
    subject = np.arange(40)
    values = (subject % 3 == 0).astype(float)
    effects = estimate_effects(
        kind, "any", values=values, in_arm=subject % 2 == 0, stratum=subject // 2 % n_strata, better="higher"
    )
    assert {f.is_stratified(effect) for effect in effects} == {n_strata > 1}


def test_other_measures_say_that_they_are_adjusted_and_which_interval_is_missing(crowded):
    hypotheses = f.gather_facts(crowded).families[0].hypotheses
    assert hypotheses[4].others == "adjusted for strata: risk ratio 0.00 (interval not estimable)"
    assert hypotheses[0].others.startswith("adjusted for strata: standardised difference ")


def test_means_have_one_decimal_more_than_the_difference(four_arms):
    h = four_arms.families[0].hypotheses[0]
    h = replace(h, mean_arm=3.14, sd_arm=23.41, effect=replace(h.effect, estimate=-1.2, se=12.0, low=-25.0, high=22.0))
    family = replace(four_arms.families[0], hypotheses=(h,))
    (shown,) = f.gather_facts(replace(four_arms, families=(family,))).families[0].hypotheses
    assert (shown.estimate, shown.arm_summary) == ("\u22121", "3.1 (23.4)")


def test_the_control_statement_is_parted_between_sentences_and_loses_no_word(four_arms):
    words = "Strong control. Across pairs (Boole's inequality): p = (1 + S)/(1 + B); 0.060 at 0.05. Others stay out."
    family = replace(four_arms.families[0], control=words)
    control = f.gather_facts(replace(four_arms, families=(family,))).families[0].control
    assert len(control) == 3
    assert " ".join(control) == words


def test_risk_differences_are_shown_in_percentage_points(four_arms):
    h = next(h for h in f.gather_facts(four_arms).families[0].hypotheses if h.raw.kind == "binary")
    assert h.measure == "risk difference, percentage points"
    assert float(h.estimate) == pytest.approx(100 * h.raw.effect.estimate, abs=0.05)


def test_an_estimate_has_two_significant_digits_of_its_standard_error(four_arms):
    effect = four_arms.families[0].hypotheses[0].effect
    shown = replace(effect, estimate=1.23456, se=0.0472, low=1.1, high=1.3)
    assert f.effect_in_words(shown) == ("1.235", "1.100 to 1.300")


def test_enumerated_p_are_called_exact(two_families):
    assert {h.monte_carlo for h in f.gather_facts(two_families).families[1].hypotheses} == {"exact"}


def test_saving_is_told_only_where_it_is_offered(two_families):
    first, second = f.gather_facts(two_families).families
    assert f"{first.raw.equivalent_endpoints:.1f} independent ones" in first.saving
    assert second.saving == ""


def test_method_gives_both_p_value_formulas_where_both_were_used(two_families, four_arms):
    both = " ".join(dict(describe_method(f.gather_facts(two_families)))["Counting"])
    assert "p = (1 + S) / (1 + B)" in both
    assert "p = S / |G|" in both
    assert "|G|" not in " ".join(dict(describe_method(f.gather_facts(four_arms)))["Counting"])


def test_method_states_seed_generator_draws_and_relabellings_of_the_run(invented, four_arms):
    facts = f.gather_facts(replace(four_arms, run=replace(four_arms.run, seed=98_765, generator="Other bits")))
    entries = dict(describe_method(facts))
    assert "seed 98765 (generator: Other bits)" in " ".join(entries["Counting"])
    assert "Draws: 20,000." in " ".join(entries["Family “secondary”"])
    assert "1 %, vehicle: " in " ".join(entries["Family “secondary”"])


def test_reproduction_holds_every_hash_but_no_date(four_arms):
    text = str(describe_run(f.gather_facts(four_arms)))
    run = four_arms.run
    assert run.plan_sha256 in text
    assert all(digest in text for _, digest in run.data_sha256)
    assert run.finished_utc not in text


@pytest.mark.parametrize("procedure", [name for name in PROCEDURES if name != "none"])
def test_the_paper_behind_a_procedure_is_listed(four_arms, procedure):
    references = list_references(f.gather_facts(_with_procedure(four_arms, procedure)))
    cited = PROCEDURES[procedure][1].split("; ")
    assert all(REFERENCES[name] in references for name in cited)


def test_papers_that_played_no_part_are_not_listed(four_arms):
    references = list_references(f.gather_facts(four_arms))
    assert REFERENCES["Westfall & Young 1993"] in references
    assert REFERENCES["Hommel 1988"] not in references


def test_a_procedure_that_uses_no_maximum_does_not_claim_its_saving(four_arms):
    family = f.gather_facts(_with_procedure(four_arms, "Holm")).families[0]
    assert "would cost" in family.saving
    assert family.saving.endswith("by Holm's step-down procedure, makes no use of it.")


def test_answer_says_so_where_every_rejection_points_the_same_way(four_arms):
    family = four_arms.families[0]
    kept = tuple(h for h in family.hypotheses if h.group != "Tolerability")
    answer = f.gather_facts(replace(four_arms, families=(replace(family, hypotheses=kept),))).families[0].answer
    assert answer[1] == "In all of these the tested arm did better than its reference."


def test_ratios_have_at_least_two_decimals(four_arms):
    h = next(h for h in four_arms.families[0].hypotheses if h.kind == "binary")
    wide = replace(h.other_effects[0], estimate=1.4, low=0.2, high=8.9)
    assert f.effect_in_words(wide) == ("1.40", "0.20 to 8.90")


def test_no_saving_is_claimed_where_the_joint_judgement_costs_more_than_independence(four_arms):
    family = replace(four_arms.families[0], equivalent_endpoints=42.5)
    saving = f.gather_facts(replace(four_arms, families=(family,))).families[0].saving
    assert saving.startswith("Here the correlation saves nothing")
    assert "Because the statistics move together" not in saving
