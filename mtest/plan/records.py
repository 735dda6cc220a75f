"""What was fixed in advance: the analysis plan as records, each rule beside the field it governs."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field

Name = Annotated[str, Field(min_length=1)]
Level = Annotated[float, Field(gt=0, lt=1)]

Scheme = Literal["complete", "stratified", "blocks", "matched sets"]
Kind = Literal["continuous", "ordinal", "binary"]
StatisticName = Literal["welch", "pooled", "difference", "unscaled difference", "rank", "score"]
MissingRule = Literal["available", "worst-score"]
Procedure = Literal[
    "step-down max-T",
    "single-step max-T",
    "Bonferroni",
    "Sidak",
    "Holm",
    "Holm-Sidak",
    "Hochberg",
    "Hommel",
    "Benjamini-Hochberg",
    "Benjamini-Yekutieli",
    "none",
]


class Record(BaseModel):
    """A part of the plan: unknown keys are faults, and nothing changes after reading."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class Study(Record):
    """The study and the significance level that families take unless they state their own."""

    title: Name
    protocol: str = ""
    alpha: Level = 0.05


class LongTable(Record):
    """A table with one row per subject, parameter and visit."""

    file: Name
    subject: str = ""  # column of the subject's identifier; empty: the same name as in [data]
    parameter: Name = "parameter"
    visit: Name = "visit"


class Data(Record):
    """Where the data lie, relative to the plan file."""

    subjects: Name
    subject: Name
    long: tuple[LongTable, ...] = ()


class Randomisation(Record):
    """How the study was randomised; the exchange cells follow from it."""

    scheme: Scheme
    arm: Name
    arms: Annotated[tuple[Name, ...], Field(min_length=2)]
    reference: str = ""
    strata: tuple[Name, ...] = ()
    block: str = ""
    set: str = ""


class Draws(Record):
    """How many relabellings are drawn, from which seed, and up to what size all are enumerated instead."""

    at_least: Annotated[int, Field(ge=99)] = 20_000
    at_most: Annotated[int, Field(ge=99)] = 200_000
    seed: Annotated[int, Field(ge=0)]
    exact_limit: Annotated[int, Field(ge=0)] = 200_000


class Value(Record):
    """Where an endpoint's values stand: a column of the subject table, or of a long table at a parameter and visit."""

    column: Name
    parameter: str = ""
    visit: str = ""


class Endpoint(Record):
    """One outcome, its direction, its statistic and what is done where it is missing."""

    name: Name
    kind: Kind
    value: Value
    better: Literal["higher", "lower"]
    statistic: StatisticName | None = None  # None: the default of the kind
    missing: MissingRule = "available"
    levels: tuple[Name, ...] = ()  # ordinal text values, from lowest to highest
    event: str | int | float | bool | None = None  # the binary value that counts as 1; None: data are 0 and 1
    unit: str = ""
    group: str = ""  # endpoints of one group share a panel in the figures


class AnalysisSet(Record):
    """A named set of subjects: those whose columns hold the stated values. Nobody leaves the relabelling."""

    name: Name
    where: Annotated[dict[str, str | int | float | bool], Field(min_length=1)]


class Family(Record):
    """Hypotheses judged together: endpoints x comparisons, one error rate, one procedure."""

    name: Name
    endpoints: Literal["all"] | Annotated[tuple[Name, ...], Field(min_length=1)]
    comparisons: (
        Literal["each vs reference", "all pairs"] | Annotated[tuple[tuple[Name, Name], ...], Field(min_length=1)]
    )
    procedure: Procedure = "step-down max-T"
    alternative: Literal["two-sided", "better"] = "two-sided"
    alpha: Level | None = None  # None: the study's; a one-sided family must state its own
    analysis_set: str = ""
    exchange: Literal["within-pair", "all-arms"] = "within-pair"
    across_pairs: Literal["joint", "boole"] | None = None  # None: the default of the alternative and comparisons
    why_valid: str = ""  # the reason that admits Hochberg or Hommel where several arms are compared


class Plan(Record):
    """A complete analysis plan: nothing that changes a number lives anywhere else."""

    study: Study
    data: Data
    randomisation: Randomisation
    draws: Draws
    endpoint: Annotated[tuple[Endpoint, ...], Field(min_length=1)]
    analysis_set: tuple[AnalysisSet, ...] = ()
    family: Annotated[tuple[Family, ...], Field(min_length=1)]


DEFAULT_STATISTIC: dict[str, str] = {"continuous": "welch", "ordinal": "rank", "binary": "score"}
