"""The control statement: what error rate a family's result controls, how, and resting on what.

Made from what was really run, by table. Keys: the kind of procedure, and how its null distribution was made.
"""

from __future__ import annotations

from dataclasses import dataclass

NULL_WITHIN = (
    "no effect of the arm on the joint distribution, missingness included, of the endpoints concerned among the "
    "subjects of the two arms compared"
)

# How the null distribution was made -> in words. Chosen by `reference_kind`.
ONE_PAIR, JOINT, JOINT_MIXED, BOOLE, ALL_ARMS = "one pair", "joint", "joint, one-sided, mixed", "boole", "all-arms"

MAX_T = {
    ONE_PAIR: (
        "Familywise error rate, strong control across endpoints, exact in finite samples. "
        f"Hypothesis tested: {NULL_WITHIN}."
    ),
    JOINT: (
        "Familywise error rate. Across endpoints within each pair of arms: strong control, exact in finite samples. "
        "Across pairs: strong control in large samples; the relabelled statistics of pairs that share an arm are, to "
        "first order, correlated no more strongly than the data are, and in every layout examined the adjustment was "
        f"right or conservative. Hypothesis tested: {NULL_WITHIN}; other arms do not enter."
    ),
    JOINT_MIXED: (
        "Familywise error rate. Across endpoints within each pair of arms: strong control, exact in finite samples. "
        "Across pairs: not guaranteed, since one-sided comparisons without a common reference are correlated with the "
        "wrong sign under shared keys; 0.060 was found at a nominal 0.05. Joining pairs by Boole's inequality controls "
        f"it. Hypothesis tested: {NULL_WITHIN}; other arms do not enter."
    ),
    BOOLE: (
        "Familywise error rate, strong control across endpoints and pairs, exact in finite samples (Boole's inequality "
        f"across pairs). Hypothesis tested: {NULL_WITHIN}; other arms do not enter."
    ),
    ALL_ARMS: (
        "Familywise error rate, weak control only: exact under the complete null hypothesis that no arm differs from "
        "any other on any endpoint. When some arms differ, {studentised}"
    ),
}
STUDENTISED = {
    True: "the statistics being studentised, control for the remaining hypotheses holds in large samples only.",
    False: "control for the remaining hypotheses is not guaranteed, not even in large samples.",
}

FROM_P = {
    "Bonferroni": "Familywise error rate, strong control under any dependence",
    "Holm": "Familywise error rate, strong control under any dependence",
    "Sidak": "Familywise error rate, strong control if the statistics are independent or positively orthant dependent",
    "Holm-Sidak": "Familywise error rate, strong control if the statistics are independent or positively orthant "
    "dependent",
    "Hochberg": "Familywise error rate, strong control if the statistics are positively dependent (MTP2)",
    "Hommel": "Familywise error rate, strong control if Simes' inequality holds (positive dependence)",
    "Benjamini-Hochberg": "False discovery rate, not the familywise error rate; controlled if the statistics are "
    "positively dependent on each true null (PRDS)",
    "Benjamini-Yekutieli": "False discovery rate, not the familywise error rate; controlled under any dependence",
    "none": "No adjustment: each hypothesis is tested at its own level and the chance of some false rejection is not "
    "controlled",
}
P_VALID = {
    False: f"each p-value is exact in finite samples for its own hypothesis ({NULL_WITHIN}).",
    True: "each p-value is exact only if no arm differs from any other; otherwise {studentised}",
}
P_STUDENTISED = {
    True: "it is valid in large samples, the statistic being studentised.",
    False: "it may be invalid, even in large samples.",
}

SOURCE = {
    True: "All distinct relabellings were enumerated.",
    False: "Relabellings were drawn at random; with p = (1 + S)/(1 + B) this keeps the level.",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class WhatWasRun:
    """What a control statement follows from.

    procedure, exchange, across_pairs : as in the plan, defaults filled in
    pairs : (tested, reference) of the family
    n_arms : of the study
    two_sided : whether the alternatives are
    exact : whether all relabellings were enumerated
    stratified : whether scores were centred within more than one stratum
    statistics : of the family's endpoints
    """

    procedure: str
    exchange: str
    across_pairs: str
    pairs: tuple[tuple[int, int], ...]
    n_arms: int
    two_sided: bool
    exact: bool
    stratified: bool
    statistics: tuple[str, ...]


def reference_kind(run: WhatWasRun) -> str:
    """Return the key of `MAX_T` for what was run."""
    if run.exchange == "all-arms" and run.n_arms > 2:
        return ALL_ARMS
    if len(run.pairs) == 1:
        return ONE_PAIR
    if run.across_pairs == "boole":
        return BOOLE
    return JOINT if run.two_sided or has_common_reference(run.pairs) else JOINT_MIXED


def has_common_reference(pairs: tuple[tuple[int, int], ...]) -> bool:
    """Return whether all pairs have the same reference."""
    return len({reference for _, reference in pairs}) == 1


def control_statement(run: WhatWasRun) -> str:
    """Return the control statement of a family in two or three sentences.

    Notes
    -----
    A statistic counts as studentised if it estimates a variance per arm and no stratum means are taken over other arms.
    """
    kind = reference_kind(run)
    studentised = not run.stratified and set(run.statistics) == {"welch"}
    if run.procedure.endswith("max-T"):
        text = MAX_T[kind].format(studentised=STUDENTISED[studentised])
    else:
        all_arms = kind == ALL_ARMS
        text = f"{FROM_P[run.procedure]}; {P_VALID[all_arms].format(studentised=P_STUDENTISED[studentised])}"
    return f"{text} {SOURCE[run.exact]}"
