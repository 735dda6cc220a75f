"""Rules that bind several keys of a plan together; all are checked, so that all faults are seen at once."""

from __future__ import annotations

from collections.abc import Callable, Iterator

from mtest.plan.family_rules import FAMILY_RULES
from mtest.plan.records import DEFAULT_STATISTIC, Endpoint, Plan
from mtest.plan.wording import item, listed, nearest, shown

STATISTICS: dict[str, tuple[str, ...]] = {
    "continuous": ("welch", "pooled", "difference", "unscaled difference", "rank"),
    "ordinal": ("rank",),
    "binary": ("score", "difference"),
}

# What each scheme needs beside `arm` and `arms`, and what else it can use; any other key is a leftover.
SCHEME_NEEDS: dict[str, tuple[str, ...]] = {
    "complete": (),
    "stratified": ("strata",),
    "blocks": ("block",),
    "matched sets": ("set",),
}
SCHEME_ALSO: dict[str, tuple[str, ...]] = {"blocks": ("strata",)}


def broken_rules(plan: Plan) -> list[str]:
    """Return a sentence for each broken rule, without the file name.

    A plan may lack sections (those whose form is wrong); the rules that need them are then left out.
    """
    present = set(plan.__dict__)
    return [sentence for needs, rule in (*RULES, *FAMILY_RULES) if present.issuperset(needs) for sentence in rule(plan)]


def _unique_names(section: str) -> Callable[[Plan], Iterator[str]]:
    def rule(plan: Plan) -> Iterator[str]:
        first: dict[str, int] = {}
        for index, record in enumerate(getattr(plan, section)):
            if record.name in first:
                yield (
                    f"{item(section, index, record.name)}.name must differ from every other {section}'s; "
                    f"got the name of {section}[{first[record.name] + 1}] again. Rename one of them."
                )
            first.setdefault(record.name, index)

    return rule


def _plain_names(plan: Plan) -> Iterator[str]:
    for arm in plan.randomisation.arms:
        if arm != arm.strip():
            yield (
                f"randomisation.arms must not begin or end with white space, which is stripped from the data; "
                f"got {shown(arm)}. Write {shown(arm.strip())}."
            )


def _unique_arms(plan: Plan) -> Iterator[str]:
    arms = plan.randomisation.arms
    for arm in dict.fromkeys(arm for arm in arms if arms.count(arm) > 1):
        yield (
            f"randomisation.arms must name each arm once; got {shown(arm)} {arms.count(arm)} times. Remove the others."
        )


def _reference_is_an_arm(plan: Plan) -> Iterator[str]:
    arms, reference = plan.randomisation.arms, plan.randomisation.reference
    if reference and reference not in arms:
        yield (
            f"randomisation.reference must be one of randomisation.arms, {listed(arms)}; "
            f"got {shown(reference)}.{nearest(reference, arms) or ' Correct the name, or add the arm.'}"
        )


def _scheme_has_its_columns(plan: Plan) -> Iterator[str]:
    scheme = plan.randomisation.scheme
    for key in SCHEME_NEEDS[scheme]:
        if not getattr(plan.randomisation, key):
            what = "the columns that hold the strata" if key == "strata" else f"the column that holds the {key}"
            yield f"randomisation.{key} must be given under scheme '{scheme}'; got none. Name {what}."


def _scheme_has_no_leftovers(plan: Plan) -> Iterator[str]:
    scheme = plan.randomisation.scheme
    used = SCHEME_NEEDS[scheme] + SCHEME_ALSO.get(scheme, ())
    for key in ("strata", "block", "set"):
        got = getattr(plan.randomisation, key)
        if got and key not in used:
            takers = [name for name in SCHEME_NEEDS if key in SCHEME_NEEDS[name] + SCHEME_ALSO.get(name, ())]
            yield (
                f"randomisation.{key} must not be given under scheme '{scheme}', which would ignore it; got "
                f"{shown(got)}. "
                f"Remove it, or state the scheme that was used: {listed(takers)}."
            )


def _columns_have_one_role(plan: Plan) -> Iterator[str]:
    randomisation = plan.randomisation
    columns = [plan.data.subject, randomisation.arm, *randomisation.strata, randomisation.block, randomisation.set]
    for column in dict.fromkeys(column for column in columns if column and columns.count(column) > 1):
        yield (
            f"randomisation must give each column one role (subject, arm, stratum, block or set); "
            f"got column {shown(column)} {columns.count(column)} times. Correct or remove the others."
        )


def _draws_in_order(plan: Plan) -> Iterator[str]:
    draws = plan.draws
    if draws.at_least > draws.at_most:
        yield (
            f"draws.at_least must not exceed draws.at_most; got {draws.at_least} and {draws.at_most}. "
            "Lower the first or raise the second."
        )


def _long_tables_once(plan: Plan) -> Iterator[str]:
    files = [table.file for table in plan.data.long]
    for file in dict.fromkeys(file for file in files if files.count(file) > 1):
        yield f"data.long must name each file once; got {shown(file)} {files.count(file)} times. Remove the others."


def _value_is_whole(plan: Plan) -> Iterator[str]:
    for where, endpoint in _endpoints(plan):
        value = endpoint.value
        if bool(value.parameter) != bool(value.visit):
            given, absent = ("parameter", "visit") if value.parameter else ("visit", "parameter")
            yield (
                f"{where}.value must give both parameter and visit for a long table, or neither for the subject table; "
                f"got {given} = {shown(getattr(value, given))} alone. Add {absent}, or remove {given}."
            )


def _long_values_have_a_table(plan: Plan) -> Iterator[str]:
    for where, endpoint in _endpoints(plan):
        if (endpoint.value.parameter or endpoint.value.visit) and not plan.data.long:
            yield (
                f"{where}.value must find its parameter and visit in a long table; got no [[data.long]]. "
                "Add [[data.long]] with its file, or name a column of the subject table alone."
            )


def _statistic_fits_kind(plan: Plan) -> Iterator[str]:
    for where, endpoint in _endpoints(plan):
        allowed = STATISTICS[endpoint.kind]
        if endpoint.statistic and endpoint.statistic not in allowed:
            yield (
                f"{where}.statistic must be {listed(allowed)} for kind '{endpoint.kind}'; got "
                f"{shown(endpoint.statistic)}. "
                f"Leave the key out for '{DEFAULT_STATISTIC[endpoint.kind]}'."
            )


def _missing_rule_fits(plan: Plan) -> Iterator[str]:
    for where, endpoint in _endpoints(plan):
        if endpoint.missing == "worst-score" and endpoint.kind == "continuous" and endpoint.statistic != "rank":
            yield (
                f"{where}.missing must be 'available' for a continuous endpoint that is not ranked, because a worst "
                "score "
                'has a rank but no size; got \'worst-score\'. Write missing = "available", or statistic = "rank".'
            )


def _levels_and_event_fit_kind(plan: Plan) -> Iterator[str]:
    for where, endpoint in _endpoints(plan):
        if endpoint.levels and endpoint.kind != "ordinal":
            yield (
                f"{where}.levels must be given for kind 'ordinal' only; got it for '{endpoint.kind}'. "
                "Remove levels, or correct kind."
            )
        if endpoint.event is not None and endpoint.kind != "binary":
            yield (
                f"{where}.event must be given for kind 'binary' only; got it for '{endpoint.kind}'. "
                "Remove event, or correct kind."
            )


def _levels_make_an_order(plan: Plan) -> Iterator[str]:
    for where, endpoint in _endpoints(plan):
        levels = endpoint.levels
        for level in dict.fromkeys(level for level in levels if levels.count(level) > 1):
            yield (
                f"{where}.levels must name each level once, from lowest to highest; "
                f"got {shown(level)} {levels.count(level)} times. Remove the others."
            )
        if len(levels) == 1:
            yield f"{where}.levels must name at least two levels; got {shown(levels[0])} alone. Add the others."


def _endpoints(plan: Plan) -> Iterator[tuple[str, Endpoint]]:
    for index, endpoint in enumerate(plan.endpoint):
        yield item("endpoint", index, endpoint.name), endpoint


Rule = tuple[tuple[str, ...], Callable[[Plan], Iterator[str]]]

# The sections a rule needs, and the rule.
RULES: tuple[Rule, ...] = (
    (("endpoint",), _unique_names("endpoint")),
    (("family",), _unique_names("family")),
    (("analysis_set",), _unique_names("analysis_set")),
    (("randomisation",), _unique_arms),
    (("randomisation",), _plain_names),
    (("randomisation",), _reference_is_an_arm),
    (("randomisation",), _scheme_has_its_columns),
    (("randomisation",), _scheme_has_no_leftovers),
    (("randomisation", "data"), _columns_have_one_role),
    (("draws",), _draws_in_order),
    (("data",), _long_tables_once),
    (("endpoint",), _value_is_whole),
    (("endpoint", "data"), _long_values_have_a_table),
    (("endpoint",), _statistic_fits_kind),
    (("endpoint",), _missing_rule_fits),
    (("endpoint",), _levels_and_event_fit_kind),
    (("endpoint",), _levels_make_an_order),
)
