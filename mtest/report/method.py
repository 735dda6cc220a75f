"""The method in words and the reproduction details, filled from what was really run."""

from __future__ import annotations

from mtest.report import formats
from mtest.report.facts import FamilyFacts, ReportFacts, counted
from mtest.report.wording import (
    ACROSS_PAIRS,
    EXCHANGE,
    MISSING_RULES,
    PROCEDURES,
    REFERENCES,
    SCHEMES,
    STATISTICS,
    procedure_in_words,
    sidedness,
)

Entry = tuple[str, tuple[str, ...]]  # a term and its paragraphs
MANY_SETS = 12  # reference sets listed one by one up to here


def describe_method(facts: ReportFacts) -> tuple[Entry, ...]:
    """Return the method as terms with paragraphs, one set for the study and one for each family."""
    common = (
        ("Randomisation", _randomisation(facts)),
        ("Counting", _counting(facts)),
        ("Statistics", _statistics(facts)),
        ("Missing outcomes", _missing(facts)),
        ("Rounding", (_ROUNDING,)),
    )
    return common + tuple((f"Family “{family.raw.name}”", _family(family)) for family in facts.families)


def list_references(facts: ReportFacts) -> tuple[str, ...]:
    """Return the papers that the method, as described, refers to."""
    text = " ".join(part for _, paragraphs in describe_method(facts) for part in paragraphs)
    return tuple(entry for cited, entry in REFERENCES.items() if cited in text)


def describe_run(facts: ReportFacts) -> tuple[Entry, ...]:
    """Return what a second person needs to get the same digits, without the date of the run."""
    run = facts.result.run
    return (
        ("Program", (f"mtest {run.mtest_version}",)),
        ("Libraries", (", ".join(f"{name} {version}" for name, version in run.versions),)),
        ("Machine", (f"{run.platform}; {run.cpu}; linear algebra: {run.blas}",)),
        ("Seed and generator", (f"seed {run.seed}; {run.generator}; blocks of {counted(run.block_draws, 'draw')}",)),
        (
            "Draws asked for",
            (
                f"at least {formats.format_count(run.draws_at_least)}, at most "
                f"{formats.format_count(run.draws_at_most)}; all relabellings enumerated up to "
                f"{formats.format_count(run.exact_limit)}",
            ),
        ),
        (f"Plan, SHA-256 of {run.plan_file}", (run.plan_sha256,)),
        *((f"Data, SHA-256 of {name}", (digest,)) for name, digest in run.data_sha256),
    )


_ROUNDING = (
    "Values are compared before they are rounded. Rounding is half up in decimal. p-values have three decimals, more "
    "where three would make one look equal to the level it is compared with; below 0.001 they print as <0.001 and "
    "above 0.999 as >0.999. Estimates show two significant digits of their standard error."
)


def _randomisation(facts: ReportFacts) -> tuple[str, ...]:
    study = facts.result.study
    words = SCHEMES[study.scheme]
    strata = f" Stratification factors: {', '.join(study.strata)}." if study.strata else ""
    return (
        f"The test relabels subjects in the way the study was randomised. {words[0].upper()}{words[1:]}. There are "
        f"{counted(study.n_cells, 'exchange cell')}.{strata} All randomised subjects keep their place in the "
        "relabelling, under the arm they were allocated to.",
    )


def _counting(facts: ReportFacts) -> tuple[str, ...]:
    run = facts.result.run
    parts = []
    if any(not family.raw.exact for family in facts.families):
        parts.append(
            f"Relabellings are drawn from seed {run.seed} (generator: {run.generator}) in blocks of "
            f"{formats.format_count(run.block_draws)}; draw r is the same whatever the number of processes. One draw "
            "serves every endpoint. With S draws of B at least as extreme as the observed data, "
            "p = (1 + S) / (1 + B) (Phipson & Smyth 2010), which is never zero. Drawing goes on from "
            f"{formats.format_count(run.draws_at_least)} up to {formats.format_count(run.draws_at_most)} draws until "
            "every decision is settled: until the confidence sequence of each adjusted p (Robbins 1970), which stays "
            "valid under stopping, lies on one side of the level."
        )
    if any(family.raw.exact for family in facts.families):
        parts.append(
            "Where the distinct relabellings were few enough, all were enumerated: with S of the |G| relabellings at "
            "least as extreme as the observed data, the observed one included, p = S / |G|, without Monte Carlo error."
        )
    parts.append(
        "“At least as extreme” allows for rounding in the last bits: a statistic counts when it is no more than 1e-9 "
        "of that statistic's spread below the observed one, or no more than rounding can explain where two arms hardly "
        "overlap."
    )
    return tuple(parts)


def _statistics(facts: ReportFacts) -> tuple[str, ...]:
    rows = {}
    for family in facts.families:
        for h in family.hypotheses:
            rows.setdefault((h.raw.kind, h.raw.statistic), (h.raw.model, h.raw.effect.measure, h.raw.effect.method))
    kinds = (
        f"{kind[0].upper()}{kind[1:]} endpoints: {STATISTICS[statistic]}. Model-based p: {model}. "
        f"Estimate: {measure}; interval: {method}."
        for (kind, statistic), (model, measure, method) in rows.items()
    )
    return (*kinds, "Where the design has strata, scores are centred or ranked within them.")


def _missing(facts: ReportFacts) -> tuple[str, ...]:
    rules = dict.fromkeys(count.rule for count in facts.accounting)
    return (
        *(f"Rule “{rule}”: {MISSING_RULES[rule]}." for rule in rules),
        "No subject is dropped from one endpoint because another is missing.",
    )


def _family(family: FamilyFacts) -> tuple[str, ...]:
    raw = family.raw
    source = PROCEDURES[raw.procedure][1]
    cited = f" ({source})" if source else ""
    who = raw.analysis_set or "all randomised subjects"
    sentences = (
        f"Analysis set: {who}. Comparisons: {raw.comparisons}. Alternative: {sidedness(raw.alternative)}. Level: "
        f"{formats.format_plain(raw.alpha)}. Procedure: {procedure_in_words(raw.procedure)}{cited}.",
        " ".join(part for part in (EXCHANGE[raw.exchange], _across(family)) if part),
        f"{'Relabellings enumerated' if raw.exact else 'Draws'}: {formats.format_count(raw.n_draws)}. Smallest "
        f"attainable p: {formats.format_number(raw.smallest_p, 6)}. Distinct relabellings: {_sets(family)}.",
        raw.control,
    )
    return tuple(sentence for sentence in sentences if sentence)


def _across(family: FamilyFacts) -> str:
    if len(family.comparisons) < 2 or family.raw.exchange == "all-arms":
        return ""
    return ACROSS_PAIRS[family.raw.across_pairs]


def _sets(family: FamilyFacts) -> str:
    sets = family.raw.n_distinct
    if len(sets) > MANY_SETS:
        counts = [count for _, count in sets]
        low, high = formats.format_count(min(counts)), formats.format_count(max(counts))
        return f"{low} to {high} over {len(sets)} reference sets"
    return "; ".join(f"{name}: {formats.format_count(count)}" for name, count in sets)
