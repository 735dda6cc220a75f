"""Each key of a plan reaches the number it governs, and each warning stands where it is due."""

import pytest

from mtest.analyse import run_plan
from mtest.plan.read import read_plan

PLAN = """
[study]
title = "A study (invented)"
[data]
subjects = "subjects.csv"
subject = "id"
[randomisation]
scheme = "complete"
arm = "arm"
arms = ["vehicle", "gel"]
reference = "vehicle"
[draws]
at_least = 1024
at_most = 1024
seed = 1
[[endpoint]]
name = "Pain"
kind = "continuous"
value = "pain"
better = "lower"
[[analysis_set]]
name = "kept"
where = { kept = "Y" }
[[family]]
name = "All"
endpoints = "all"
comparisons = "each vs reference"
"""
PAIN = [5, 7, 9, 4, 6, 8, 1, 3, 2, 4.5, 2.5, 5.5]
SAMPLED = ("seed = 1", "seed = 1\nexact_limit = 0")


@pytest.fixture
def run(tmp_path):
    """Run `PLAN` on six subjects an arm, with texts of the plan replaced and columns changed."""

    def run(*changes, **columns):
        table = {
            "id": [f"s{k:02}" for k in range(12)],
            "arm": ["vehicle"] * 6 + ["gel"] * 6,
            "pain": PAIN,
            "kept": ["Y"] * 12,
        } | columns
        rows = [",".join(map(str, row)) for row in zip(*table.values(), strict=True)]
        (tmp_path / "subjects.csv").write_text("\n".join([",".join(table), *rows]) + "\n", encoding="utf-8")
        text = PLAN
        for old, new in changes:
            assert old in text
            text = text.replace(old, new)
        (tmp_path / "plan.toml").write_text(text, encoding="utf-8")
        return run_plan(read_plan(tmp_path / "plan.toml"), n_jobs=1)

    return run


def family(result):
    return result.families[0]


def only(result):
    (h,) = family(result).hypotheses
    return h


FAMILY_KEY = 'comparisons = "each vs reference"'


def with_key(key):
    return FAMILY_KEY, f"{FAMILY_KEY}\n{key}"


def test_values_outside_the_analysis_set_count_as_missing(run):
    kept = ["Y"] * 5 + ["N"] + ["Y"] * 5 + ["N"]
    pain, blank = ([p if k == "Y" else odd for p, k in zip(PAIN, kept)] for odd in (1000, ""))
    by_set = only(run(with_key('analysis_set = "kept"'), kept=kept, pain=pain))
    by_hand = only(run(pain=blank))
    assert (by_set.p_unadjusted, by_set.effect, by_set.n_arm) == (by_hand.p_unadjusted, by_hand.effect, 5)
    assert (by_set.missing_arm, by_hand.missing_arm) == (0, 1)  # outside the set nobody is missing


def test_the_accounting_counts_who_was_filled(run):
    binary = ('kind = "continuous"', 'kind = "binary"\nmissing = "worst-score"')
    counts = run(binary, pain=[1, 0, "", 0, 1, 1, "", "", 0, 0, 1, 0]).accounting
    assert [(c.arm, c.n_analysed, c.n_missing, c.n_filled) for c in counts] == [("vehicle", 6, 0, 1), ("gel", 6, 0, 2)]


def test_in_all_pairs_the_later_arm_of_the_plan_is_tested(run):
    h = only(run((FAMILY_KEY, 'comparisons = "all pairs"')))
    assert (h.arm, h.reference) == ("gel", "vehicle")


def test_a_family_is_judged_at_its_own_level(run):
    p = only(run()).p_adjusted
    for alpha, rejected in ((p * 0.9, False), (p, True), (p * 1.1, True)):
        result = run(with_key(f"alpha = {alpha!r}"))
        assert (family(result).alpha, only(result).rejected) == (alpha, rejected)


@pytest.mark.parametrize(("better", "small"), [("lower", True), ("higher", False)])
def test_one_sided_p_values_follow_the_better_direction(run, better, small):
    """The gel's values are lower."""
    h = only(run(('better = "lower"', f'better = "{better}"'), with_key('alternative = "better"\nalpha = 0.025')))
    assert h.statistic_value < 0
    assert (h.p_unadjusted < 0.1, h.p_model < 0.1) == (small, small)


def test_intervals_cover_95_in_100(run):
    assert only(run()).effect.level == 0.95


def test_an_open_decision_is_warned_about(run):
    p = only(run(SAMPLED)).p_adjusted
    result = run(SAMPLED, with_key(f"alpha = {p!r}"))
    assert not only(result).settled
    assert any(text.startswith("Not settled") and "Pain, gel vs vehicle" in text for text in family(result).warnings)
    assert not any(text.startswith("Not settled") for text in family(run(SAMPLED, with_key("alpha = 0.9"))).warnings)


def test_a_decision_that_hangs_on_near_ties_is_warned_about(run):
    """One value lies 1e-7 below its twin in the other arm; alpha lies between the p without and with the near ties."""
    pain = [3 - 1e-7, 1, 2, 5, 4, 6, 3, 7, 8, 9, 5, 8]
    exact = only(run(pain=[round(x) for x in pain])).p_adjusted
    near = only(run(pain=pain))
    assert near.p_adjusted < exact
    result = run(with_key(f"alpha = {near.p_adjusted!r}"), pain=pain)
    assert any("depends on draws that fall short" in text for text in family(result).warnings)
    assert not any("fall short" in text for text in family(run(with_key("alpha = 0.9"), pain=pain)).warnings)


@pytest.mark.parametrize(("alpha", "warned"), [(0.001, True), (0.05, False)])
def test_a_level_that_no_relabelling_can_reach_is_warned_about(run, alpha, warned):
    """924 relabellings."""
    warnings = family(run(with_key(f"alpha = {alpha}"))).warnings
    assert any(text.startswith("No hypothesis can be rejected") for text in warnings) is warned


def test_one_statistic_that_is_not_studentised_takes_the_large_sample_claim_away(run):
    three = ('arms = ["vehicle", "gel"]', 'arms = ["vehicle", "gel", "salve"]')
    ranked = (
        "[[analysis_set]]",
        '[[endpoint]]\nname = "Rank"\nkind = "ordinal"\nvalue = "pain"\nbetter = "lower"\n[[analysis_set]]',
    )
    arm = ["vehicle", "gel", "salve"] * 4
    all_arms = with_key('exchange = "all-arms"')
    assert "holds in large samples only" in family(run(three, all_arms, arm=arm)).control
    assert "not even in large samples" in family(run(three, all_arms, ranked, arm=arm)).control


def test_exchange_says_who_was_relabelled(run):
    three = ('arms = ["vehicle", "gel"]', 'arms = ["vehicle", "gel", "salve"]')
    arm = ["vehicle", "gel", "salve"] * 4
    assert [name for name, _ in family(run(three, arm=arm)).n_distinct] == ["gel vs vehicle", "salve vs vehicle"]
    assert family(run(three, with_key('exchange = "all-arms"'), arm=arm)).n_distinct == (("all arms", 34_650),)


def test_across_pairs_is_as_planned(run):
    three = ('arms = ["vehicle", "gel"]', 'arms = ["vehicle", "gel", "salve"]')
    result = run(three, with_key('across_pairs = "boole"'), arm=["vehicle", "gel", "salve"] * 4)
    assert family(result).across_pairs == "boole"
    assert "Boole's inequality" in family(result).control


def test_labels_are_exchanged_within_blocks(run):
    blocks = ('scheme = "complete"', 'scheme = "blocks"\nblock = "block"')
    result = run(blocks, block=[1, 2, 3] * 4)
    assert family(result).n_distinct == (("gel vs vehicle", 6**3),)


def test_the_seed_of_the_plan_makes_the_draws(run):
    one, again, two = (
        family(run(("seed = 1", f"seed = {seed}\nexact_limit = 0"))).counts[0][1].tolist() for seed in (1, 1, 2)
    )
    assert one == again != two


def test_drawing_goes_on_to_at_most(run):
    p = only(run(SAMPLED)).p_adjusted
    result = run(SAMPLED, ("at_most = 1024", "at_most = 4096"), with_key(f"alpha = {p!r}"))
    assert family(result).n_draws == 4096
