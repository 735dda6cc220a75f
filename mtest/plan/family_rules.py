"""Rules that bind a family to its endpoints, arms, analysis set and procedure."""

from __future__ import annotations

from collections.abc import Callable, Iterator

from mtest.plan.records import Family, Plan
from mtest.plan.wording import item, listed, nearest, shown

MAX_T = ("step-down max-T", "single-step max-T")
NEED_DEPENDENCE = ("Hochberg", "Hommel")  # valid under a kind of positive dependence only


def _endpoints_known(plan: Plan) -> Iterator[str]:
    known = [endpoint.name for endpoint in plan.endpoint]
    for where, family in _families(plan):
        for name in family.endpoints if family.endpoints != "all" else ():
            if name not in known:
                hint = nearest(name, known) or f" The plan has {listed(known, last='and')}."
                yield f"{where}.endpoints must name endpoints of the plan; got {shown(name)}.{hint}"


def _endpoints_once(plan: Plan) -> Iterator[str]:
    for where, family in _families(plan):
        names = family.endpoints if family.endpoints != "all" else ()
        for name in dict.fromkeys(name for name in names if names.count(name) > 1):
            yield (
                f"{where}.endpoints must name each endpoint once; got {shown(name)} {names.count(name)} times. "
                "Remove the others."
            )


def _reference_given(plan: Plan) -> Iterator[str]:
    for where, family in _families(plan):
        if family.comparisons == "each vs reference" and not plan.randomisation.reference:
            yield (
                f"{where}.comparisons must have a reference arm to be 'each vs reference'; got no "
                "randomisation.reference. "
                f"Add reference = one of {listed(plan.randomisation.arms)} to [randomisation]."
            )


def _pairs_are_arms(plan: Plan) -> Iterator[str]:
    arms = plan.randomisation.arms
    for where, _, pair in _pairs(plan):
        for arm in dict.fromkeys(pair):
            if arm not in arms:
                hint = nearest(arm, arms) or " Correct the name, or add the arm."
                yield (
                    f"{where} must name two of randomisation.arms, {listed(arms, last='and')}; got {shown(arm)}.{hint}"
                )


def _pairs_differ(plan: Plan) -> Iterator[str]:
    for where, _, (arm, reference) in _pairs(plan):
        if arm == reference:
            yield f"{where} must name two different arms; got {shown(arm)} twice. Correct one of them."


def _pairs_once(plan: Plan) -> Iterator[str]:
    seen: dict[tuple[str, frozenset[str]], str] = {}
    for where, family, pair in _pairs(plan):
        key = (family, frozenset(pair))
        if key in seen and len(key[1]) == 2:
            yield (
                f"{where} must be another pair of arms, in either order, than every pair before; got {shown(pair)}, "
                "the "
                f"arms of {seen[key]} again. Remove one."
            )
        seen.setdefault(key, where.rpartition(".")[2])


def _analysis_set_known(plan: Plan) -> Iterator[str]:
    known = [record.name for record in plan.analysis_set]
    for where, family in _families(plan):
        name = family.analysis_set
        if name and name not in known:
            hint = nearest(name, known) or " Add it, or leave the key out for all randomised subjects."
            have = listed(known, last="and") or "no [[analysis_set]]"
            yield (
                f"{where}.analysis_set must name an analysis set of the plan, which has {have}; got "
                f"{shown(name)}.{hint}"
            )


def _one_sided_states_alpha(plan: Plan) -> Iterator[str]:
    for where, family in _families(plan):
        if family.alternative == "better" and family.alpha is None:
            yield (
                f"{where}.alpha must be stated where alternative is 'better', because a one-sided level is not the "
                "study's "
                "two-sided one; got none. Add alpha, for instance half of study.alpha."
            )


def _dependence_argued(plan: Plan) -> Iterator[str]:
    for where, family in _families(plan):
        if family.procedure in NEED_DEPENDENCE and n_pairs(plan, family) > 1 and not family.why_valid.strip():
            yield (
                f"{where}.procedure must not be '{family.procedure}' where several pairs of arms are compared, "
                "because it "
                "needs a kind of positive dependence that pairwise comparisons do not guarantee; "
                f"got {n_pairs(plan, family)} pairs. Choose 'Holm' or 'step-down max-T', "
                "or state in why_valid why the dependence holds."
            )


def _reason_is_used(plan: Plan) -> Iterator[str]:
    for where, family in _families(plan):
        if family.why_valid and family.procedure not in NEED_DEPENDENCE:
            yield (
                f"{where}.why_valid must be given for 'Hochberg' and 'Hommel' only; got it with '{family.procedure}'. "
                "Remove it, or correct procedure."
            )


def _across_pairs_is_used(plan: Plan) -> Iterator[str]:
    for where, family in _families(plan):
        if family.across_pairs is None:
            continue
        if family.exchange == "all-arms":
            yield (
                f"{where}.across_pairs must not be given with exchange 'all-arms', where one relabelling serves all "
                "pairs; "
                f"got '{family.across_pairs}'. Remove it, or write exchange = \"within-pair\"."
            )
        elif family.across_pairs == "boole" and family.procedure not in MAX_T:
            yield (
                f"{where}.across_pairs must be 'boole' with {listed(MAX_T)} only; got it with '{family.procedure}', "
                "which "
                "takes the pairs together by their p-values. Remove across_pairs, or correct procedure."
            )


def n_pairs(plan: Plan, family: Family) -> int:
    """Return the number of arm pairs that a family compares."""
    n_arms = len(plan.randomisation.arms)
    if family.comparisons == "each vs reference":
        return n_arms - 1
    if family.comparisons == "all pairs":
        return n_arms * (n_arms - 1) // 2
    return len(family.comparisons)


def _families(plan: Plan) -> Iterator[tuple[str, Family]]:
    for index, family in enumerate(plan.family):
        yield item("family", index, family.name), family


def _pairs(plan: Plan) -> Iterator[tuple[str, str, tuple[str, str]]]:
    for where, family in _families(plan):
        if not isinstance(family.comparisons, str):
            for index, pair in enumerate(family.comparisons):
                yield f"{where}.{item('comparisons', index)}", where, pair


# The sections a rule needs, and the rule.
FAMILY_RULES: tuple[tuple[tuple[str, ...], Callable[[Plan], Iterator[str]]], ...] = (
    (("family", "endpoint"), _endpoints_known),
    (("family",), _endpoints_once),
    (("family", "randomisation"), _reference_given),
    (("family", "randomisation"), _pairs_are_arms),
    (("family",), _pairs_differ),
    (("family",), _pairs_once),
    (("family", "analysis_set"), _analysis_set_known),
    (("family",), _one_sided_states_alpha),
    (("family", "randomisation"), _dependence_argued),
    (("family",), _reason_is_used),
    (("family",), _across_pairs_is_used),
)
