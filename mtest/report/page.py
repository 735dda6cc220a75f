"""The report as one page that needs nothing but itself."""

from __future__ import annotations

import math
from dataclasses import dataclass
from importlib import resources

import jinja2

from mtest.report.drawing import Picture
from mtest.report.facts import FamilyFacts, gather_facts
from mtest.report.figures import draw_adjustment, draw_correlation, draw_forest, draw_null
from mtest.report.method import describe_method, describe_run, list_references
from mtest.report.tables import Table, accounting_table, decision_matrix, results_table, summaries_table
from mtest.report.wording import CAUTIONS, GLOSSARY
from mtest.results import AnalysisResult

CONTENTS = (
    ("answer", "The answer"),
    ("results", "Results"),
    ("estimates", "Estimates"),
    ("adjustment", "Adjustment"),
    ("maximum", "Maximum"),
    ("correlation", "Correlation"),
    ("accounting", "Data accounting"),
    ("method", "Method"),
    ("cautions", "Cautions"),
    ("reproduction", "Reproduction"),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class FamilyView:
    """One family with everything the page sets of it."""

    facts: FamilyFacts
    decisions: Table
    results: Table
    summaries: Table
    forest: tuple[tuple[str, tuple[Picture, ...]], ...]
    panels_hidden: int
    adjustment: Picture | None
    null: Picture | None
    correlation: Picture | None


def render_page(result: AnalysisResult) -> str:
    """Return the report as one HTML page: styles, script and pictures inside, nothing fetched.

    Parameters
    ----------
    result : AnalysisResult
        NaN prints as an en dash, infinities as ∞; what a family does not have (null distribution, correlation) is
        said to be missing, with the reason.

    Returns
    -------
    str
        The same text for the same result: `run.finished_utc` is left out.

    Notes
    -----
    Every text of the result is escaped; the page's own policy forbids it to load or send anything
    (tests/browser/test_page.py).
    """
    facts = gather_facts(result)
    environment = _environment()
    return environment.get_template("page.html").render(
        facts=facts,
        families=[_view(family) for family in facts.families],
        accounting=accounting_table(facts),
        contents=CONTENTS,
        method=describe_method(facts),
        run=describe_run(facts),
        references=list_references(facts),
        glossary=GLOSSARY,
        cautions=CAUTIONS,
        style=_read("style.css"),
        script=_read("sort.js"),
    )


def _view(family: FamilyFacts) -> FamilyView:
    forest = draw_forest(family)
    return FamilyView(
        facts=family,
        decisions=decision_matrix(family),
        results=results_table(family),
        summaries=summaries_table(family),
        forest=forest,
        panels_hidden=len(family.endpoints) - sum(len(panels) for _, panels in forest),
        adjustment=draw_adjustment(family),
        null=draw_null(family),
        correlation=draw_correlation(family),
    )


def _environment() -> jinja2.Environment:
    environment = jinja2.Environment(
        loader=jinja2.PackageLoader("mtest.report", "templates"),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    environment.filters["sort_key"] = _sort_key
    return environment


def _sort_key(value: float | str | None) -> str:
    """What the script sorts by: numbers in full, infinities as JavaScript reads them, nothing for NaN."""
    if value is None or isinstance(value, str):
        return value or ""
    number = float(value)
    if math.isnan(number):
        return ""
    if math.isinf(number):
        return "Infinity" if number > 0 else "-Infinity"
    return repr(number)


def _read(name: str) -> str:
    return resources.files("mtest.report").joinpath("templates", name).read_text(encoding="utf-8")
