"""Fixed words of the report: what each procedure, scheme and rule is called, the glossary and the cautions."""

from __future__ import annotations

ERROR_RATE: dict[str, str] = {
    "Benjamini-Hochberg": "false discovery rate",
    "Benjamini-Yekutieli": "false discovery rate",
    "none": "",
}  # every other procedure aims at the familywise error rate

PROCEDURES: dict[str, tuple[str, str]] = {
    "step-down max-T": ("the step-down max-T procedure", "Westfall & Young 1993"),
    "single-step max-T": ("the single-step max-T procedure", "Westfall & Young 1993"),
    "Bonferroni": ("the Bonferroni procedure", "Dunn 1961"),
    "Sidak": ("the Šidák procedure", "Šidák 1967"),
    "Holm": ("Holm's step-down procedure", "Holm 1979"),
    "Holm-Sidak": ("Holm's step-down procedure with Šidák levels", "Holm 1979; Šidák 1967"),
    "Hochberg": ("Hochberg's step-up procedure", "Hochberg 1988"),
    "Hommel": ("Hommel's procedure", "Hommel 1988"),
    "Benjamini-Hochberg": ("the Benjamini-Hochberg procedure", "Benjamini & Hochberg 1995"),
    "Benjamini-Yekutieli": ("the Benjamini-Yekutieli procedure", "Benjamini & Yekutieli 2001"),
    "none": ("no adjustment", ""),
}

SCHEMES: dict[str, str] = {
    "complete": "complete randomisation: labels are exchanged among all subjects, with the arm sizes as they were",
    "stratified": "stratified randomisation: labels are exchanged within strata only, as randomised",
    "blocks": "randomisation in blocks: labels are exchanged within blocks only; t statistics are taken about their "
    "mean over relabellings, which is not 0 where blocks have unequal ratios",
    "matched sets": "randomisation within matched sets: labels are exchanged within sets only",
}

EXCHANGE: dict[str, str] = {
    "within-pair": "For a comparison of two arms only the subjects of those two arms exchange their labels; the data "
    "of other arms never enter it (Troendle & Westfall 2011).",
    "all-arms": "All arms exchange their labels together; for a comparison of two arms this is exact only where no arm "
    "differs from any other.",
}

ACROSS_PAIRS: dict[str, str] = {
    "joint": "Comparisons that share an arm share random keys of its subjects: all of them where the arms have equal "
    "sizes, else as many as keep comparisons from moving together more closely than they do in the study.",
    "boole": "Comparisons are combined by Boole's inequality, step by step, each with its own relabellings; this holds "
    "whatever the dependence between them.",
}

STATISTICS: dict[str, str] = {
    "welch": "Welch's t: the difference in means over its unpooled standard error",
    "pooled": "Student's t: the difference in means over its pooled standard error",
    "difference": "the difference in means over its standard deviation under relabelling",
    "unscaled difference": "the difference in means as it is",
    "rank": "the standardised rank sum, on midranks within stratum (Wilcoxon; van Elteren with strata)",
    "score": "the score z for two proportions, with the pooled variance",
}

MISSING_RULES: dict[str, str] = {
    "available": "the subject's outcome stays missing and travels with the subject when labels are exchanged",
    "worst-score": "a missing outcome is given the worst there is: ranked below the worst that was observed, or, of "
    "two outcomes, counted as the worse",
}

GLOSSARY: dict[str, tuple[str, str]] = {
    "comparison": ("Comparison", "The arm under test against its reference arm."),
    "n": (
        "n (missing)",
        "Subjects analysed in the arm, and in brackets those randomised to it who are not analysed for this endpoint.",
    ),
    "estimate": (
        "Estimate",
        "The size of the difference, arm less reference, in the measure named under the endpoint. P(better) is the "
        "chance that a subject of the arm does better than one of the reference, ties counted half.",
    ),
    "interval": (
        "Interval",
        "The textbook confidence interval of the estimate. It stands for one hypothesis alone, is not simultaneous, "
        "and may therefore disagree with the adjusted p.",
    ),
    "p-unadjusted": (
        "p, unadjusted",
        "The share of relabellings whose statistic is at least as extreme as the observed one, for this hypothesis "
        "alone.",
    ),
    "p-model": ("p, model", "The p-value of the textbook test of the same hypothesis, for comparison."),
    "p-holm": ("p, Holm", "The unadjusted p after Holm's adjustment, which uses no correlation between hypotheses."),
    "p-adjusted": (
        "p, adjusted",
        "The p-value by the family's own procedure, fixed in the plan. It decides: the hypothesis is rejected where it "
        "is at or below the family's level.",
    ),
    "monte-carlo": (
        "Monte Carlo interval",
        "Where the adjusted p would lie if every relabelling were enumerated: a confidence sequence, which stays valid "
        "however the number of draws was chosen. “exact” where all were enumerated.",
    ),
    "step": (
        "Step",
        "The hypothesis's place in the order in which the procedure considered them; 1 is the first.",
    ),
    "decision": ("Decision", "Rejected or not rejected at the family's level, taken on unrounded values."),
    "maximum": (
        "Maximum (max-T)",
        "The largest statistic in the family under one relabelling. Its distribution shows what the best-looking of "
        "all hypotheses reaches when no arm does anything.",
    ),
    "equivalent": (
        "Equivalent number of independent hypotheses",
        "The number of independent hypotheses that would need the same critical value: log(1 − alpha) / "
        "log(1 − local alpha). With a single comparison it is the equivalent number of independent endpoints.",
    ),
    "filled": ("Filled", "Subjects analysed whose missing outcome was replaced by the endpoint's rule."),
}

CAUTIONS: tuple[str, ...] = (
    "The method has to be fixed before unblinding. Results of a method chosen after the data were seen do not have the "
    "error rate stated here.",
    "Regulators usually meet re-randomisation tests as sensitivity analyses. Agree a primary use with the authority "
    "first.",
    "The intervals shown are textbook intervals of single hypotheses. They are not simultaneous and are not made by "
    "relabelling, so an interval may exclude the null where the adjusted p does not reject, and the other way round.",
    "A hypothesis that is not rejected has not been shown to be true.",
    "These results support, and do not replace, the judgement of a qualified statistician and the rules that apply "
    "locally.",
)

REFERENCES: dict[str, str] = {
    "Benjamini & Hochberg 1995": (
        "Benjamini Y, Hochberg Y (1995). Controlling the false discovery rate: a practical and powerful approach "
        "to multiple testing. Journal of the Royal Statistical Society B 57, 289–300."
    ),
    "Benjamini & Yekutieli 2001": (
        "Benjamini Y, Yekutieli D (2001). The control of the false discovery rate in multiple testing under "
        "dependency. Annals of Statistics 29, 1165–1188."
    ),
    "Dunn 1961": (
        "Dunn OJ (1961). Multiple comparisons among means. Journal of the American Statistical Association 56, 52–64."
    ),
    "Hochberg 1988": (
        "Hochberg Y (1988). A sharper Bonferroni procedure for multiple tests of significance. Biometrika 75, 800–802."
    ),
    "Holm 1979": (
        "Holm S (1979). A simple sequentially rejective multiple test procedure. Scandinavian Journal of "
        "Statistics 6, 65–70."
    ),
    "Hommel 1988": (
        "Hommel G (1988). A stagewise rejective multiple test procedure based on a modified Bonferroni test. "
        "Biometrika 75, 383–386."
    ),
    "Phipson & Smyth 2010": (
        "Phipson B, Smyth GK (2010). Permutation p-values should never be zero: calculating exact p-values when "
        "permutations are randomly drawn. Statistical Applications in Genetics and Molecular Biology 9(1), "
        "article 39."
    ),
    "Robbins 1970": (
        "Robbins H (1970). Statistical methods related to the law of the iterated logarithm. Annals of "
        "Mathematical Statistics 41, 1397–1409."
    ),
    "Troendle & Westfall 2011": (
        "Troendle JF, Westfall PH (2011). Permutational multiple testing adjustments with multivariate multiple "
        "group data. Journal of Statistical Planning and Inference 141, 2021–2029."
    ),
    "Westfall & Young 1993": (
        "Westfall PH, Young SS (1993). Resampling-Based Multiple Testing: Examples and Methods for p-Value "
        "Adjustment. New York: Wiley."
    ),
    "Šidák 1967": (
        "Šidák Z (1967). Rectangular confidence regions for the means of multivariate normal distributions. "
        "Journal of the American Statistical Association 62, 626–633."
    ),
}


def procedure_in_words(procedure: str) -> str:
    """Return the procedure's name as it stands in a sentence."""
    return PROCEDURES[procedure][0]


def error_rate(procedure: str) -> str:
    """Return the error rate the procedure aims at; "" for none."""
    return ERROR_RATE.get(procedure, "familywise error rate")


def uses_maximum(procedure: str) -> bool:
    """Return whether the procedure refers to the distribution of the maximum."""
    return procedure.endswith("max-T")


def sidedness(alternative: str) -> str:
    """Return the alternative in words."""
    return "one-sided, in favour of the tested arm" if alternative == "better" else "two-sided"
