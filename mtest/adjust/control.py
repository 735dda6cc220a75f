"""The control statement: what error rate a family's result controls, how, and resting on what.

Made from what was really run, by table. Keys: the kind of procedure, and how its null distribution was made.
"""

from __future__ import annotations

NULL_WITHIN = (
    "no effect of the arm on the joint distribution, missingness included, of the endpoints concerned among the "
    "subjects of the two arms compared"
)

# How the null distribution was made -> in words. Chosen by `reference_kind`.
ONE_PAIR, JOINT, BOOLE, ALL_ARMS = "one pair", "joint", "boole", "all-arms"

MAX_T = {
    ONE_PAIR: (
        "Familywise error rate, strong control across endpoints, exact in finite samples. "
        f"Hypothesis tested: {NULL_WITHIN}."
    ),
    JOINT: (
        "Familywise error rate. Across endpoints within each pair of arms: strong control, exact in finite samples. "
        "Across pairs: strong control, asymptotic; the relabelled statistics of pairs that share an arm are correlated "
        "no more than the data are, to first order, so the adjustment is right or conservative in large samples. "
        f"Hypothesis tested: {NULL_WITHIN}; other arms do not enter."
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


def reference_kind(*, exchange: str, across_pairs: str, n_pairs: int) -> str:
    """Return the key of `MAX_T` for what was run."""
    if exchange == "all-arms":
        return ALL_ARMS
    if n_pairs == 1:
        return ONE_PAIR
    return {"joint": JOINT, "boole": BOOLE}[across_pairs]


def control_statement(
    *, procedure: str, exchange: str, across_pairs: str, n_pairs: int, exact: bool, studentised: bool
) -> str:
    """Return the control statement of a family in two or three sentences.

    Parameters
    ----------
    procedure : str
        As in the plan.
    exchange, across_pairs : str
        As run.
    n_pairs : int
        Pairs of arms in the family.
    exact : bool
        Whether all relabellings were enumerated.
    studentised : bool
        Whether every statistic of the family is studentised by an estimate that allows unequal variances.
    """
    kind = reference_kind(exchange=exchange, across_pairs=across_pairs, n_pairs=n_pairs)
    if procedure.endswith("max-T"):
        text = MAX_T[kind].format(studentised=STUDENTISED[studentised])
    else:
        all_arms = kind == ALL_ARMS
        text = f"{FROM_P[procedure]}; {P_VALID[all_arms].format(studentised=P_STUDENTISED[studentised])}"
    return f"{text} {SOURCE[exact]}"
