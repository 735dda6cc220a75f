"""What the report shows, as plain records: every number already text, every decision already in words.

Tables, figures, the page and the document are made from these records and decide nothing themselves.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from mtest.report import formats
from mtest.report.wording import error_rate, procedure_in_words, sidedness, uses_maximum
from mtest.results import AnalysisResult, ArmCount, Effect, FamilyResult, HypothesisResult

PERCENT_MEASURES = ("risk difference",)  # shown in percentage points
STRATIFIED_METHODS = ("strata", "Mantel-Haenszel")  # words of methods that adjust for strata
_SENTENCE_END = re.compile(r"(?<=\.) (?=[A-Z])")


@dataclass(frozen=True, slots=True, kw_only=True)
class HypothesisFacts:
    """One hypothesis as displayed; `raw` keeps the unrounded record for sorting and drawing.

    direction : "better" or "worse" for the tested arm, "" where it cannot be told
    decision : "rejected", "not rejected", or for a procedure without an error rate "nominal" or "–"
    """

    raw: HypothesisResult
    comparison: str
    measure: str
    estimate: str
    interval: str
    n_arm: str
    n_reference: str
    arm_summary: str
    reference_summary: str
    others: str
    statistic: str
    p_unadjusted: str
    p_model: str
    p_holm: str
    p_single_step: str
    p_step_down: str
    p_adjusted: str
    monte_carlo: str
    direction: str
    decision: str


@dataclass(frozen=True, slots=True, kw_only=True)
class FamilyFacts:
    """One family as displayed.

    level : the error rate and its level in words, e.g. "familywise error rate of 5 %"
    answer : plain sentences, the first thing a reader meets
    control : the control statement, sentence by sentence
    unsettled : one sentence for each decision the draws did not settle
    saving : what the correlation between the statistics saved; "" where not offered
    """

    raw: FamilyResult
    key: str
    level: str
    answer: tuple[str, ...]
    control: tuple[str, ...]
    unsettled: tuple[str, ...]
    saving: str
    hypotheses: tuple[HypothesisFacts, ...]
    endpoints: tuple[str, ...]
    comparisons: tuple[str, ...]
    groups: tuple[str, ...]
    warnings: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class ReportFacts:
    """The whole report as displayed."""

    title: str
    protocol: str
    status: str
    arms: tuple[str, ...]
    families: tuple[FamilyFacts, ...]
    accounting: tuple[ArmCount, ...]
    warnings: tuple[str, ...]
    result: AnalysisResult


def gather_facts(result: AnalysisResult) -> ReportFacts:
    """Return the display facts of a result; nothing in them depends on when or where they are made."""
    families = tuple(_family_facts(family, f"family-{number}") for number, family in enumerate(result.families, 1))
    study = result.study
    return ReportFacts(
        title=study.title,
        protocol=study.protocol,
        status=_status(result),
        arms=tuple(f"{arm} (N={n})" for arm, n in zip(study.arms, study.n_by_arm, strict=True)),
        families=families,
        accounting=result.accounting,
        warnings=result.warnings,
        result=result,
    )


def counted(count: int, noun: str, plural: str = "") -> str:
    """Return a count with its noun in the right number."""
    return f"{formats.format_count(count)} {noun if count == 1 else plural or noun + 's'}"


def _status(result: AnalysisResult) -> str:
    hypotheses = [h for family in result.families for h in family.hypotheses]
    hanging = sum(not h.settled for h in hypotheses)
    n_warnings = len(result.warnings) + sum(len(family.warnings) for family in result.families)
    parts = [
        f"{counted(sum(result.study.n_by_arm), 'subject')} in {counted(len(result.study.arms), 'arm')}",
        f"{counted(len(hypotheses), 'hypothesis', 'hypotheses')} in "
        f"{counted(len(result.families), 'family', 'families')}",
        "every decision settled" if not hanging else f"{counted(hanging, 'decision')} NOT settled",
        "no warnings" if not n_warnings else counted(n_warnings, "warning"),
    ]
    return "; ".join(parts) + "."


def _family_facts(family: FamilyResult, key: str) -> FamilyFacts:
    hypotheses = tuple(_hypothesis_facts(h, family) for h in family.hypotheses)
    rate = error_rate(family.procedure)
    level = f"{rate} of {formats.format_percent(family.alpha)}" if rate else "no error rate"
    return FamilyFacts(
        raw=family,
        key=key,
        level=level,
        answer=_answer(family, hypotheses, level if rate else ""),
        control=tuple(_SENTENCE_END.split(family.control)),
        unsettled=tuple(_hanging(h) for h in hypotheses if not h.raw.settled),
        saving=_saving(family),
        hypotheses=hypotheses,
        endpoints=tuple(dict.fromkeys(h.raw.endpoint for h in hypotheses)),
        comparisons=tuple(dict.fromkeys(h.comparison for h in hypotheses)),
        groups=tuple(dict.fromkeys(h.raw.group for h in hypotheses)),
        warnings=family.warnings,
    )


def _answer(family: FamilyResult, hypotheses: tuple[HypothesisFacts, ...], level: str) -> tuple[str, ...]:
    total = counted(len(hypotheses), "hypothesis", "hypotheses")
    rejected = [h for h in hypotheses if h.raw.rejected]
    if not level:
        return (
            f"No error rate is controlled in this family: {len(rejected)} of {total} have a p-value at or below "
            f"{formats.format_plain(family.alpha)}, {sidedness(family.alternative)}. "
            "These p-values are nominal; none of them is called significant.",
        )
    number = f"{len(rejected)} of {total}" if rejected else f"None of {total}"
    verb = "is" if len(rejected) <= 1 else "are"
    sentences = [
        f"{number} {verb} rejected at a {level}, {sidedness(family.alternative)}, "
        f"by {procedure_in_words(family.procedure)}."
    ]
    ways = [(way, sum(h.direction == way for h in rejected)) for way in ("better", "worse", "")]
    said = [f"{n} with the tested arm {way}" if way else f"{n} without a direction" for way, n in ways if n]
    ways_seen = {h.direction for h in rejected}
    if len(ways_seen) == 1 and (way := ways_seen.pop()):
        where = "In all of these" if len(rejected) > 1 else "There"
        sentences.append(f"{where} the tested arm did {way} than its reference.")
    elif said:
        sentences.append("Of these, " + " and ".join(said) + ".")
    return tuple(sentences)


def _hanging(h: HypothesisFacts) -> str:
    return (
        f"{h.raw.endpoint}, {h.comparison}: the adjusted p is {h.p_adjusted}, but its Monte Carlo interval "
        f"({h.monte_carlo}) covers the level it is compared with; more draws could reverse the decision."
    )


def _saving(family: FamilyResult) -> str:
    if not (math.isfinite(family.equivalent_endpoints) and math.isfinite(family.local_alpha)):
        return ""
    m = len(family.hypotheses)
    own = uses_maximum(family.procedure)
    joint = (
        f"judging these {m} hypotheses by their maximum {'costs' if own else 'would cost'} as much as judging "
        f"{formats.format_number(family.equivalent_endpoints, 1)} independent ones (the equivalent number of "
        "independent hypotheses)"
    )
    levels = (
        f"each is held to {formats.format_p(family.local_alpha, alpha=1e-4)} where an equal split of "
        f"{formats.format_plain(family.alpha)} would leave {formats.format_p(family.alpha / m, alpha=1e-4)}."
    )
    if family.equivalent_endpoints < m:
        sentences = [f"Because the statistics move together, {joint}: {levels}"]
    else:  # a maximum over statistics with unlike tails can cost more than an equal split
        sentences = [
            f"Here the correlation saves nothing: {joint}; {levels} Either the statistics hardly move together, or the "
            "tails of their distributions are unlike."
        ]
    if not own:
        sentences.append(f"This family's adjustment, by {procedure_in_words(family.procedure)}, makes no use of it.")
    return " ".join(sentences)


def _hypothesis_facts(h: HypothesisResult, family: FamilyResult) -> HypothesisFacts:
    alpha = family.alpha
    estimate, interval = effect_in_words(h.effect)

    def p(value: float) -> str:
        return formats.format_p(value, alpha=alpha)

    digits = _digits_of_means(h)
    reach = formats.format_p_range(h.p_adjusted_low, h.p_adjusted_high, alpha=alpha)

    return HypothesisFacts(
        raw=h,
        comparison=f"{h.arm} vs {h.reference}",
        measure=measure_in_words(h.effect, h.unit),
        estimate=estimate,
        interval=interval,
        n_arm=f"{h.n_arm} ({h.missing_arm})",
        n_reference=f"{h.n_reference} ({h.missing_reference})",
        arm_summary=_summary(h.kind, h.mean_arm, h.sd_arm, h.n_arm, digits),
        reference_summary=_summary(h.kind, h.mean_reference, h.sd_reference, h.n_reference, digits),
        others=_others(h.other_effects),
        statistic=formats.format_number(h.statistic_value, 2),
        p_unadjusted=p(h.p_unadjusted),
        p_model=p(h.p_model),
        p_holm=p(h.p_holm),
        p_single_step=p(h.p_single_step),
        p_step_down=p(h.p_step_down),
        p_adjusted=p(h.p_adjusted),
        monte_carlo="exact" if family.exact else reach,
        direction=direction_of(h),
        decision=_decision(h, family.procedure),
    )


def _decision(h: HypothesisResult, procedure: str) -> str:
    if not error_rate(procedure):
        return "nominal" if h.rejected else "–"
    return "rejected" if h.rejected else "not rejected"


def direction_of(h: HypothesisResult) -> str:
    """Return whether the tested arm did "better" or "worse" than its reference; "" where neither can be said.

    A measure that speaks of "better" already follows the endpoint's direction; every other is the arm's value less
    (or over) the reference's.
    """
    lead = h.effect.estimate - h.effect.null
    if math.isnan(lead):
        lead = h.mean_arm - h.mean_reference
    elif "better" in h.effect.measure:
        return "better" if lead > 0 else "worse" if lead < 0 else ""
    if math.isnan(lead) or lead == 0:
        return ""
    return "better" if (lead > 0) == (h.better == "higher") else "worse"


def shown_scale(effect: Effect) -> float:
    """Return the factor from the stored to the displayed unit: 100 for measures shown in percentage points."""
    return 100.0 if effect.measure in PERCENT_MEASURES else 1.0


def effect_in_words(effect: Effect) -> tuple[str, str]:
    """Return an estimate and its interval with the digits its standard error supports."""
    scale, digits = shown_scale(effect), _digits(effect)
    return (
        formats.format_number(effect.estimate * scale, digits),
        formats.format_range(effect.low * scale, effect.high * scale, digits),
    )


def _digits(effect: Effect) -> int:
    scale = shown_scale(effect)
    digits = formats.digits_for(_spread(effect) * scale, fallback=1 if scale > 1 else 2)
    return max(digits, 2) if effect.null == 1 else digits  # a ratio of 0.2 says less than 0.15 or 0.24


def _digits_of_means(h: HypothesisResult) -> int:
    """One decimal more than the effect on the means' own scale, else than their standard deviations support."""
    if "mean difference" in h.effect.measure and math.isfinite(h.effect.se):
        return _digits(h.effect) + 1
    return max(formats.digits_for(sd, fallback=0) for sd in (h.sd_arm, h.sd_reference)) + 1


def _others(effects: tuple[Effect, ...]) -> str:
    """The other measures with their intervals, in one line."""
    said = "; ".join(_other(effect) for effect in effects)
    return f"adjusted for strata: {said}" if any(is_stratified(effect) for effect in effects) else said


def _other(effect: Effect) -> str:
    estimate, interval = effect_in_words(effect)
    if estimate == formats.NOT_ESTIMABLE:
        return f"{effect.measure} not estimable"
    if interval == formats.NOT_ESTIMABLE:
        interval = "interval not estimable"
    return f"{effect.measure} {estimate} ({interval})"


def is_stratified(effect: Effect) -> bool:
    """Return whether the effect was estimated within strata, so that it is not the difference of the arms' values."""
    return any(word in effect.method for word in STRATIFIED_METHODS)


def _spread(effect: Effect) -> float:
    """The standard error on the scale shown: from the interval for ratios, whose own is on the log scale."""
    if effect.null == 1 and math.isfinite(effect.high - effect.low):
        return (effect.high - effect.low) / 4
    return effect.se


def measure_in_words(effect: Effect, unit: str) -> str:
    """Return the measure with the unit it is displayed in, and whether it is adjusted for strata."""
    parts = [effect.measure]
    if effect.measure in PERCENT_MEASURES:
        parts.append("percentage points")
    elif unit and ("difference" in effect.measure or "shift" in effect.measure):
        parts.append(unit)  # probabilities and ratios have no unit, whatever the endpoint was measured in
    if is_stratified(effect):
        parts.append("adjusted for strata")
    return ", ".join(parts)


def _summary(kind: str, mean: float, sd: float, n: int, digits: int) -> str:
    if math.isnan(mean) or n == 0:
        return formats.NOT_ESTIMABLE
    if kind == "binary":
        return f"{round(mean * n)} ({formats.format_number(mean * 100, 1)} %)"
    return f"{formats.format_number(mean, digits)} ({formats.format_number(sd, digits)})"
