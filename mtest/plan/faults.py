"""From the record checker's findings to sentences in the plan author's words."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import Any, get_args

from pydantic_core import ErrorDetails

from mtest.plan.records import Plan, Record
from mtest.plan.remedies import example_pairs, remedy
from mtest.plan.wording import item, nearest, nearest_word, shown

ENUM_CUTOFF = 0.4  # a closed list of words may suggest more boldly than names may: 'down' is near enough to 'lower'

# The rule in words, for each kind of finding that the records of the plan can lead to.
RULES: dict[str, Callable[[dict[str, Any]], str]] = {
    "literal_error": lambda ctx: f"must be {ctx['expected']}",
    "string_type": lambda ctx: "must be text in quotation marks",
    "string_too_short": lambda ctx: "must not be empty",
    "int_type": lambda ctx: "must be a whole number",
    "int_from_float": lambda ctx: "must be a whole number",
    "float_type": lambda ctx: "must be a number",
    "bool_type": lambda ctx: "must be true or false",
    "greater_than": lambda ctx: f"must be greater than {ctx['gt']:g}",
    "greater_than_equal": lambda ctx: f"must be at least {ctx['ge']:g}",
    "less_than": lambda ctx: f"must be less than {ctx['lt']:g}",
    "less_than_equal": lambda ctx: f"must be at most {ctx['le']:g}",
    "finite_number": lambda ctx: "must be a finite number",
    "tuple_type": lambda ctx: "must be a list",
    "too_short": lambda ctx: f"must hold at least {ctx['min_length']} item{'s' if ctx['min_length'] > 1 else ''}",
    "too_long": lambda ctx: f"must hold at most {ctx['max_length']} items",
    "dict_type": lambda ctx: "must be a table of keys and values",
    "model_type": lambda ctx: "must be a table of keys and values",
    "model_attributes_type": lambda ctx: "must be a table of keys and values",
}
# Both ends in one sentence, which also serves for nan.
LEVEL_RULE = "must lie between 0 and 1, neither included"
FALLBACK = "is not of the form that a plan takes here"

# Where a field takes more than one form, the checker reports each form it tried; the author gets one sentence.
SEVERAL_FORMS: dict[tuple[str, str], tuple[str, tuple[str, ...]]] = {
    ("family", "endpoints"): ("must be 'all' or a list of at least one endpoint name", ()),
    ("family", "comparisons"): (
        "must be 'each vs reference', 'all pairs' or a list of pairs of arms",
        ("each vs reference", "all pairs"),
    ),
    ("endpoint", "event"): ("must be text, a number, true or false", ()),
    ("analysis_set", "where"): ("must name at least one column and the value it holds, as in { kept = 'Y' }", ()),
}
VALUE_FORM = "must be a column's name in quotation marks, or a table { parameter = ..., visit = ..., column = ... }"
ONE_VALUE = "must be text, a number, true or false"

Location = tuple[str | int, ...]


def sentences(errors: list[ErrorDetails], data: dict[str, Any]) -> list[str]:
    """Return one sentence for each faulty place, without the file name.

    Parameters
    ----------
    errors : list
        The findings of pydantic's `ValidationError.errors()`.
    data : dict
        The plan as handed to the records.
    """
    found: dict[Location, str] = {}
    meant = _meant_keys(errors)
    for error in errors:
        if error["type"] == "missing" and error["loc"] in meant:
            continue  # the key is there, misspelt, and has a sentence already
        place = _existing(error["loc"], data)
        if error["type"] == "missing" and place == error["loc"][:-1]:
            place = error["loc"]  # the key that should be there
        if error["type"] == "too_short" and len(_at(place, data) or ()) >= error["ctx"]["min_length"]:
            continue  # the checker counts only the sound items; the others have faults of their own
        # Of several findings at one place the first is kept: they are the forms tried of one field.
        found.setdefault(place, _sentence(error, place, data))
    return list(found.values())


def faulty_sections(errors: list[ErrorDetails]) -> set[str]:
    """Return the sections of the plan with a finding, and those whose name is misspelt."""
    return {str(loc[0]) for loc in (*(error["loc"] for error in errors), *_meant_keys(errors))}


def _meant_keys(errors: list[ErrorDetails]) -> set[Location]:
    """Return the places that unknown keys are near to."""
    unknown = [error["loc"] for error in errors if error["type"] == "extra_forbidden"]
    near = [(*loc[:-1], nearest_word(loc[-1], _known_keys(loc[:-1]))) for loc in unknown]
    return {loc for loc in near if loc[-1] is not None}


def _sentence(error: ErrorDetails, place: Location, data: dict[str, Any]) -> str:
    if error["type"] == "missing" and place == error["loc"]:
        return _missing(place, data)
    if error["type"] == "extra_forbidden":
        return _unknown_key(place, data)
    where, got = path(place, data), _at(place, data)
    if place[0] == "endpoint" and place[2:] == ("value",):
        return f"{where} {VALUE_FORM}; got {shown(got)}."
    if error["type"] == "tuple_type" and isinstance(got, dict) and _first_record(_annotation(place)):
        return (
            f"{where} must be a list of tables; got one table. Write [[{_written(place)}]] instead of "
            f"[{_written(place)}]."
        )
    if error["type"] in ("model_type", "model_attributes_type") and isinstance(got, tuple) and len(place) == 1:
        return f"{where} must be one table; got {shown(got)}. Write [{place[0]}] instead of [[{place[0]}]], once."
    form = SEVERAL_FORMS.get((str(place[0]), str(place[2]))) if len(place) > 2 else None
    if form is not None and len(place) > 3:
        return f"{where} {ONE_VALUE}; got {shown(got)}."
    if form is not None:
        rule = form[0] + (example_pairs(data) if place[2] == "comparisons" else "")
        hint = nearest(got, form[1], cutoff=ENUM_CUTOFF) or remedy(error, place[-1], got)
        return f"{where} {rule}; got {shown(got)}.{hint}"
    context = error.get("ctx", {})
    rule = RULES[error["type"]](context) if error["type"] in RULES else FALLBACK
    if place[-1] == "alpha" and error["type"] in ("greater_than", "less_than"):
        rule = LEVEL_RULE
    choices = re.findall(r"'([^']*)'", str(context.get("expected", "")))
    hint = nearest(got, choices, cutoff=ENUM_CUTOFF) or remedy(error, place[-1], got)
    return f"{where} {rule}; got {shown(got)}.{hint}"


def _missing(place: Location, data: dict[str, Any]) -> str:
    key = place[-1]
    if len(place) == 1:
        many = key in ("endpoint", "family")
        section = f"[[{key}]]" if many else f"[{key}]"
        return f"the plan must have {'at least one section' if many else 'a section'} {section}; got none. Add it."
    choices = [f'"{word}"' for word in _words(_annotation(place))]
    example = f" = {' or '.join(choices)}" if choices else " = a whole number of your choice" if key == "seed" else ""
    return f"{path(place[:-1], data)} must have the key '{key}'; got none. Add {key}{example}."


def _unknown_key(place: Location, data: dict[str, Any]) -> str:
    known = _known_keys(place[:-1])
    where = f"in {path(place[:-1], data)}" if len(place) > 1 else "at the top level"
    hint = nearest(place[-1], known) or " Remove it, or correct its spelling."
    return f"unknown key '{place[-1]}' {where}; the keys known there are {', '.join(known)}.{hint}"


def _known_keys(place: Location) -> list[str]:
    record = _record(place)
    return list(record.model_fields) if record else []


def path(place: Location, data: dict[str, Any]) -> str:
    """Return a place in the plan as its author counts: `endpoint[3] "Pain at rest".better`."""
    text, here = "", data
    for step in place:
        here = _step(here, step)
        if isinstance(step, int):
            head, _, section = text.rpartition(".")
            name = here.get("name", "") if isinstance(here, dict) else ""
            text = (f"{head}." if head else "") + item(section, step, name)
        else:
            text = f"{text}.{step}" if text else step
    return text


def _existing(place: Location, data: dict[str, Any]) -> Location:
    """Return the start of `place` that exists in the data; what follows are names of forms tried."""
    here: Any = data
    for count, step in enumerate(place):
        here = _step(here, step)
        if here is None:
            return place[:count]
        if (str(place[0]), str(step)) in SEVERAL_FORMS and count == 2:
            named = isinstance(here, dict) and len(place) > 3 and place[3] in here
            return place[: 4 if named else 3]
    return place


def _at(place: Location, data: Any) -> Any:
    for step in place:
        data = _step(data, step)
    return data


def _step(here: Any, step: str | int) -> Any:
    if isinstance(here, dict):
        return here.get(step)
    if isinstance(here, tuple) and isinstance(step, int) and step < len(here):
        return here[step]
    return None


def _written(place: Location) -> str:
    return ".".join(step for step in place if isinstance(step, str))


def _annotation(place: Location) -> Any:
    """Return the type of the field at `place`."""
    record = _record(place[:-1])
    return record.model_fields[str(place[-1])].annotation if record else None


def _record(place: Location) -> type[Record] | None:
    record: type[Record] | None = Plan
    for step in place:
        if isinstance(step, int):
            continue
        field = record.model_fields.get(step) if record else None
        record = _first_record(field.annotation) if field else None
    return record


def _first_record(annotation: Any) -> type[Record] | None:
    if isinstance(annotation, type) and issubclass(annotation, Record):
        return annotation
    for part in get_args(annotation):
        found = _first_record(part)
        if found:
            return found
    return None


def _words(annotation: Any) -> tuple[Any, ...]:
    """Return the words of a Literal, and nothing for any other type."""
    return tuple(word for word in get_args(annotation) if isinstance(word, str))
