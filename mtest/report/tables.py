"""One model of a table, filled once, set by both the page and the document."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from mtest.report import formats
from mtest.report.facts import FamilyFacts, HypothesisFacts, ReportFacts, is_stratified
from mtest.report.wording import error_rate

REJECTED, KEPT, HANGING = "●", "○", "◐"
LONG_MATRIX = 60  # endpoints beyond which the decision matrix shows only those with a rejection


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """A column's head, the glossary entry it refers to, and where its cells stand."""

    head: str
    term: str = ""
    align: str = "left"  # "left" | "right" | "centre"
    share: float = 1.0  # of the width of a printed page, relative to the other columns


@dataclass(frozen=True, slots=True, kw_only=True)
class Cell:
    """A cell: its text, the raw value it sorts by, a second quiet line, and what a mark says when it is read out."""

    text: str
    sort: float | str | None = None
    second: str = ""
    title: str = ""
    spoken: str = ""
    strong: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table; the first cell of each row is its header."""

    key: str
    caption: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]
    notes: tuple[str, ...] = ()
    sortable: bool = False


def decision_matrix(family: FamilyFacts) -> Table:
    """Return endpoints by comparisons, each cell a mark and the adjusted p."""
    by_place = {(h.raw.endpoint, h.comparison): h for h in family.hypotheses}
    endpoints, notes = family.endpoints, [_legend(family)]
    if len(endpoints) > LONG_MATRIX:
        endpoints = tuple(dict.fromkeys(h.raw.endpoint for h in family.hypotheses if h.raw.rejected))
        hidden = len(family.endpoints) - len(endpoints)
        notes.append(f"{hidden} endpoints without a rejection are left out here and stand in the results table.")
    rows = tuple(
        (Cell(text=name), *(_matrix_cell(by_place.get((name, comparison))) for comparison in family.comparisons))
        for name in endpoints
    )
    heads = (Column(head="Endpoint", share=2.5), *(Column(head=name) for name in family.comparisons))
    caption = f"Decisions in family “{family.raw.name}”, with adjusted p"
    return Table(key=f"{family.key}-decisions", caption=caption, columns=heads, rows=rows, notes=tuple(notes))


def results_table(family: FamilyFacts) -> Table:
    """Return every hypothesis with its estimate, its p-values side by side and the decision."""
    columns = (
        Column(head="Endpoint", share=3.2),
        Column(head="Comparison", term="comparison", share=1.5),
        Column(head="n, arm (missing)", term="n", align="right", share=1.0),
        Column(head="n, reference (missing)", term="n", align="right", share=1.1),
        Column(head="Estimate", term="estimate", align="right"),
        Column(head=_interval_head(family), term="interval", align="right", share=1.5),
        Column(head="p, unadjusted", term="p-unadjusted", align="right", share=1.15),
        Column(head="p, model", term="p-model", align="right", share=0.9),
        Column(head="p, Holm", term="p-holm", align="right", share=0.9),
        Column(head="p, adjusted", term="p-adjusted", align="right"),
        Column(head="Monte Carlo interval", term="monte-carlo", align="right", share=1.5),
        Column(head="Step", term="step", align="right", share=0.6),
        Column(head="Decision", term="decision", share=1.7),
    )
    rows = tuple(_results_row(h) for h in family.hypotheses)
    notes = (
        f"{_set(family)}; {family.level}; procedure: {family.raw.procedure}.",
        *_raw_columns(family),
        "Estimates are arm less reference. Intervals are textbook intervals, not simultaneous: they may disagree with "
        "the adjusted p.",
        "p, unadjusted: by relabelling. p, model: the textbook test. p, Holm: the unadjusted p after Holm. "
        f"{formats.NOT_ESTIMABLE} not estimable.",
        _legend(family),
    )
    caption = f"Results, family “{family.raw.name}”"
    rows = _lined_up(rows, columns)
    return Table(key=f"{family.key}-results", caption=caption, columns=columns, rows=rows, notes=notes, sortable=True)


def summaries_table(family: FamilyFacts) -> Table:
    """Return what was observed in each arm, the statistic and every max-T p beside it."""
    columns = (
        Column(head="Endpoint", share=2.6),
        Column(head="Comparison", share=1.4),
        Column(head="Arm", align="right", share=1.2),
        Column(head="Reference", align="right", share=1.2),
        Column(head="Other measures (interval)", share=3.4),
        Column(head="Statistic", align="right", share=0.9),
        Column(head="p, single-step max-T", align="right"),
        Column(head="p, step-down max-T", align="right"),
        Column(head="Near ties", align="right", share=0.7),
    )
    rows = tuple(
        (
            Cell(text=h.raw.endpoint, sort=h.raw.endpoint, second=f"{h.raw.kind}; {h.raw.better} is better"),
            Cell(text=h.comparison, sort=h.comparison),
            Cell(text=h.arm_summary, sort=h.raw.mean_arm),
            Cell(text=h.reference_summary, sort=h.raw.mean_reference),
            Cell(text=h.others or "", sort=h.others),
            _number(h.statistic, h.raw.statistic_value),
            _number(h.p_single_step, h.raw.p_single_step),
            _number(h.p_step_down, h.raw.p_step_down),
            Cell(text=formats.format_count(h.raw.near_ties), sort=h.raw.near_ties),
        )
        for h in family.hypotheses
    )
    notes = (
        "Arm and reference: mean (standard deviation) of the values as analysed, for ordinal endpoints of their "
        "ordered values; for binary endpoints number with the event (share).",
        *_raw_columns(family),
        "Near ties: draws that fall short of the observed statistic by so little that rounding might have decided.",
    )
    caption = f"Summaries and test statistics, family “{family.raw.name}”"
    rows = _lined_up(rows, columns)
    return Table(key=f"{family.key}-summaries", caption=caption, columns=columns, rows=rows, notes=notes, sortable=True)


def accounting_table(facts: ReportFacts) -> Table:
    """Return who was randomised, analysed, missing and filled, by endpoint and arm."""
    study = facts.result.study
    counts = {(count.endpoint, count.arm): count for count in facts.accounting}
    rules: dict[str, str] = {}
    for count in facts.accounting:
        rules.setdefault(count.endpoint, count.rule)
    columns = (
        Column(head="Endpoint", share=2.6),
        Column(head="Missing-data rule", share=1.2),
        *(Column(head=name, align="right") for name in facts.arms),
    )
    rows = []
    for endpoint, rule in rules.items():
        cells = [Cell(text=endpoint), Cell(text=rule)]
        for arm in study.arms:
            count = counts.get((endpoint, arm))
            if count is None:
                cells.append(Cell(text=formats.NOT_ESTIMABLE, title="not collected in this arm"))
                continue
            text = f"{count.n_analysed} ({count.n_missing}, {count.n_filled})"
            spoken = f"{count.n_analysed} analysed, {count.n_missing} missing, {count.n_filled} filled"
            cells.append(Cell(text=text, title=spoken))
        rows.append(tuple(cells))
    notes = (
        "Cells: analysed (missing, filled). N: randomised. Missing: randomised, not analysed. Filled: analysed, with "
        "the missing outcome replaced by the endpoint's rule.",
    )
    return Table(
        key="accounting-table",
        caption="Subjects randomised, analysed, missing and filled",
        columns=columns,
        rows=tuple(rows),
        notes=notes,
    )


def mark_of(h: HypothesisFacts) -> str:
    """Return the sign of a decision: its shape, not its colour, tells it."""
    if not h.raw.settled:
        return HANGING
    return REJECTED if h.raw.rejected else KEPT


def _results_row(h: HypothesisFacts) -> tuple[Cell, ...]:
    raw = h.raw
    decision = h.decision + (f", {h.direction}" if raw.rejected and h.direction else "")
    if not raw.settled:
        decision += ", not settled"
    return (
        Cell(text=raw.endpoint, sort=raw.endpoint, second=h.measure),
        Cell(text=h.comparison, sort=h.comparison),
        Cell(text=h.n_arm, sort=raw.n_arm),
        Cell(text=h.n_reference, sort=raw.n_reference),
        _number(h.estimate, raw.effect.estimate),
        _number(h.interval, raw.effect.low),
        _number(h.p_unadjusted, raw.p_unadjusted),
        _number(h.p_model, raw.p_model),
        _number(h.p_holm, raw.p_holm),
        replace(_number(h.p_adjusted, raw.p_adjusted), strong=raw.rejected),
        Cell(text=h.monte_carlo, sort=raw.p_adjusted_low),
        Cell(text=str(raw.step), sort=raw.step),
        Cell(text=f"{mark_of(h)} {decision}", sort=(not raw.rejected) + 0.0, strong=raw.rejected),
    )


def _matrix_cell(h: HypothesisFacts | None) -> Cell:
    if h is None:
        return Cell(text="", title="not a hypothesis of this family", spoken="not tested")
    hanging = "" if h.raw.settled else "not settled, "
    way = f", arm {h.direction}" if h.raw.rejected and h.direction else ""
    return Cell(
        text=f"{mark_of(h)} {h.p_adjusted}",
        second=h.direction if h.raw.rejected else "",
        spoken=f"{hanging}{h.decision}{way}, adjusted p {h.p_adjusted}",
        strong=h.raw.rejected,
    )


def _number(text: str, value: float) -> Cell:
    return Cell(text=text, sort=value, title="not estimable" if text == formats.NOT_ESTIMABLE else "")


def _lined_up(rows: tuple[tuple[Cell, ...], ...], columns: tuple[Column, ...]) -> tuple[tuple[Cell, ...], ...]:
    """The rows with the decimal points of each column of single numbers in line."""
    lined = [list(row) for row in rows]
    for place, column in enumerate(columns):
        texts = [row[place].text for row in rows]
        if column.align != "right" or any(" " in text for text in texts):
            continue
        for row, text in zip(lined, formats.align_decimals(texts), strict=True):
            row[place] = replace(row[place], text=text)
    return tuple(tuple(row) for row in lined)


def _interval_head(family: FamilyFacts) -> str:
    levels = {h.raw.effect.level for h in family.hypotheses}
    if len(levels) == 1 and math.isfinite(level := levels.pop()):
        return f"{formats.format_percent(level)} interval"
    return "Interval"


def _set(family: FamilyFacts) -> str:
    return f"Analysis set: {family.raw.analysis_set or 'all randomised subjects'}"


def _raw_columns(family: FamilyFacts) -> tuple[str, ...]:
    """Why an estimate is not the difference of what stands in the arms' columns."""
    if not any(is_stratified(h.raw.effect) for h in family.hypotheses):
        return ()
    return (
        "The arm and reference columns of the summaries are raw means and shares. Measures adjusted for strata are put "
        "together from comparisons within strata, so they differ from what the two columns alone would give.",
    )


def _legend(family: FamilyFacts) -> str:
    hanging = f"; {HANGING} not settled by the draws made" if family.unsettled else ""
    if not error_rate(family.raw.procedure):
        return f"{REJECTED} nominal p at or below {formats.format_plain(family.raw.alpha)}; {KEPT} above it{hanging}."
    return f"{REJECTED} rejected (better or worse: what the tested arm did); {KEPT} not rejected{hanging}."
