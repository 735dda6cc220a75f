"""What the author can write instead of a value of wrong form."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Callable
from typing import Any

from pydantic_core import ErrorDetails

NUMBER = re.compile(r"[+-]?\d+(\.\d+)?")
USUAL_LEVEL = 0.05  # the plan's own default of study.alpha


def remedy(error: ErrorDetails, key: str | int, got: Any) -> str:
    """Return " Write ..." or " Did you mean ...?" for a finding at a key of the plan, "" where none is known."""
    by_key, by_kind = BY_KEY.get(str(key)), BY_KIND.get(error["type"])
    told = (by_key(got) if by_key else "") or (by_kind(got, error.get("ctx", {})) if by_kind else "")
    return f" {told}" if told else ""


def example_pairs(data: dict[str, Any]) -> str:
    """Return " such as [[...]]" of the plan's own arms, or "" where it does not name two."""
    section = data.get("randomisation")
    arms = section.get("arms") if isinstance(section, dict) else None
    names = [arm for arm in arms if isinstance(arm, str) and arm] if isinstance(arms, tuple) else []
    reference = section.get("reference") if names else None
    base = reference if reference in names else names[0] if names else ""
    others = [arm for arm in names if arm != base]
    return f" such as [[{written(others[-1])}, {written(base)}]]" if others else ""


def written(value: Any) -> str:
    """Return a value as a plan holds it.

    >>> written(("4 %", 1, True))
    '["4 %", 1, true]'
    """
    if isinstance(value, tuple):
        return "[" + ", ".join(written(part) for part in value) + "]"
    if isinstance(value, (str, bool)):
        return json.dumps(value, ensure_ascii=False)
    return str(value)


def _level(got: Any) -> str:
    if _is_number(got) and 1 < got < 100:
        return f"Did you mean {got / 100:g}?"
    return "" if isinstance(got, str) and NUMBER.fullmatch(got) else f"Write a level such as {USUAL_LEVEL}."


def _seed(got: Any) -> str:
    text = got.strip() if isinstance(got, str) else ""
    return f"Write {int(text)}." if text.isdecimal() else "Write a whole number of your choice, such as 1."


def _endpoints(got: Any) -> str:
    if isinstance(got, str) and got:
        return "Did you mean 'all'?" if got.strip().casefold() == "all" else f'Write {written((got,))} or "all".'
    return 'Write a list of names, or "all".'


def _comparisons(got: Any) -> str:
    if isinstance(got, tuple) and len(got) == 2 and all(isinstance(arm, str) and arm for arm in got):
        return f"Write {written((got,))}."
    return "" if isinstance(got, str) else "Write each pair in brackets of its own, as two names of arms."


def _text(got: Any, _: dict[str, Any]) -> str:
    return f"Write {written(str(got))}." if _is_number(got) else "Write text in quotation marks."


def _number(got: Any, _: dict[str, Any]) -> str:
    if isinstance(got, str) and NUMBER.fullmatch(got.strip()):
        return f"Write {got.strip()} without quotation marks."
    return "Write a number without quotation marks."


def _whole(got: Any, context: dict[str, Any]) -> str:
    if isinstance(got, float) and math.isfinite(got) and got.is_integer():
        return f"Write {int(got)}."
    return _number(got, context)


def _list(got: Any, _: dict[str, Any]) -> str:
    return f"Write {written((got,))}." if isinstance(got, str) and got else "Write a list in brackets."


BY_KEY: dict[str, Callable[[Any], str]] = {
    "alpha": _level,
    "seed": _seed,
    "endpoints": _endpoints,
    "comparisons": _comparisons,
}
# The other kinds of finding that a record of the plan can lead to.
BY_KIND: dict[str, Callable[[Any, dict[str, Any]], str]] = {
    "string_type": _text,
    "string_too_short": lambda got, context: "Fill it in.",
    "int_type": _whole,
    "int_from_float": _whole,
    "float_type": _number,
    "finite_number": _number,
    "literal_error": lambda got, context: "Choose one of these.",
    "greater_than_equal": lambda got, context: f"Write {context['ge']:g} or more.",
    "tuple_type": _list,
    "too_short": lambda got, context: "Add the others." if got else "Fill it in.",
    "dict_type": lambda got, context: "Write its keys and values in braces.",
    "model_type": lambda got, context: "Write each key and its value below the section's heading.",
    "model_attributes_type": lambda got, context: "Write each key and its value below the section's heading.",
}


def _is_number(got: Any) -> bool:
    return isinstance(got, (int, float)) and not isinstance(got, bool)
