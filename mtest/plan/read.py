"""Read a plan file, or say everything that is wrong with it."""

from __future__ import annotations

import hashlib
import re
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import TypeAdapter, ValidationError

from mtest.errors import PlanError
from mtest.plan.faults import faulty_sections, sentences
from mtest.plan.records import Plan
from mtest.plan.rules import broken_rules

REPEATED = ("endpoint", "family", "analysis_set", "data.long")  # sections that a plan may hold more than once


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanFile:
    """A plan as read: the records, and the very text they come from.

    sha256 : hash of the file's bytes, as `sha256sum` prints it
    """

    plan: Plan
    path: Path
    text: str
    sha256: str


def read_plan(path: str | Path) -> PlanFile:
    """Return the plan in a TOML file, checked in itself (the data are not opened).

    Parameters
    ----------
    path : str or Path
        The plan file; its data files are relative to its folder.

    Raises
    ------
    PlanError
        If the file cannot be read, is not TOML, or breaks a rule of a plan: every fault at once, a sentence each.

    Examples
    --------
    >>> read_plan("configs/matched-sites.toml").plan.randomisation.scheme
    'matched sets'
    """
    path = Path(path)
    raw = _bytes(path)
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        raise PlanError(
            f"{path.name}: a plan must be UTF-8 text; got a byte that is not, in line {line}. Save the file as UTF-8."
        ) from error
    return PlanFile(plan=parse_plan(text, path.name), path=path, text=text, sha256=hashlib.sha256(raw).hexdigest())


def parse_plan(text: str, name: str) -> Plan:
    """Return the plan in a TOML text; `name` is what the faults call it.

    Raises
    ------
    PlanError
        Every fault at once. Where one section has a wrong form, the rules that need only the others are still checked.

    Examples
    --------
    >>> parse_plan("[study", "short.toml")
    Traceback (most recent call last):
    ...
    mtest.errors.PlanError: short.toml: a plan must be valid TOML; got a mistake at the end of the file ...
    """
    data = _prepared(_toml(text, name))
    try:
        plan = Plan.model_validate(data)
        faults = []
    except ValidationError as error:
        findings = error.errors(include_url=False)
        faults = sentences(findings, data)
        plan = _sound_sections(data, faulty_sections(findings))
    faults += broken_rules(plan)
    if faults:
        raise PlanError([f"{name}: {fault}" for fault in faults])
    return plan


def _bytes(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except FileNotFoundError as error:
        raise PlanError(f"{path}: a plan file must exist; got none at this path. Check the path.") from error
    except IsADirectoryError as error:
        raise PlanError(f"{path}: a plan must be one file; got a folder. Name the .toml file in it.") from error
    except OSError as error:
        reason = (error.strerror or "no reason given").lower()
        raise PlanError(
            f"{path}: a plan file must be readable; got '{reason}'. Check the path and its rights."
        ) from error


def _toml(text: str, name: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise PlanError(f"{name}: {_syntax_fault(str(error), text)}") from error
    except RecursionError as error:
        raise PlanError(
            f"{name}: a plan must be valid TOML; got brackets nested too deeply. Close them where they belong."
        ) from error


def _syntax_fault(message: str, text: str) -> str:
    reason, _, place = message.rpartition(" (at ")
    place = place.removesuffix(")").replace("end of document", "the end of the file")
    reason = reason[:1].lower() + reason[1:]
    found = re.match(r"line (\d+)", place)
    lines = text.splitlines()[: int(found[1])] if found else []
    line = lines[-1].strip() if lines else ""
    quoted = f": `{line}`" if line else ""
    if reason.startswith(("cannot overwrite", "cannot declare", "duplicate inline table key")):
        return _given_twice(f"{place}{quoted}", lines)
    if reason == "invalid value":
        return (
            f"a plan must be valid TOML; got an invalid value at {place}{quoted}. "
            "Text needs quotation marks, numbers none, true and false small letters."
        )
    return f"a plan must be valid TOML; got a mistake at {place} ({reason}){quoted}. Correct it."


def _given_twice(place: str, lines: list[str]) -> str:
    """Return the sentence for a key or a section that stands twice; `lines` end with the second of them."""
    heads = [re.match(r"\s*(\[{1,2})\s*([\w.]+)\s*\]", line) for line in lines]
    section = next((head for head in reversed(heads) if head), None)
    if section and section is heads[-1]:
        name = section[2]
        do = f"Write [[{name}]], each time" if name in REPEATED else "Put its keys under the first"
        return f"a plan must have the section [{name}] once; got it again at {place}. {do}."
    another = section and section[2] in REPEATED
    do = f", or write [[{section[2]}]] above it to begin another" if another else ""
    return f"a plan must have each key of a section once; got one again at {place}. Remove one of the two{do}."


def _prepared(data: dict[str, Any]) -> dict[str, Any]:
    """Return the TOML data with lists as tuples, and `value = "column"` written out."""
    prepared = _frozen(data)
    endpoints = prepared.get("endpoint")
    for endpoint in endpoints if isinstance(endpoints, tuple) else ():
        if isinstance(endpoint, dict) and isinstance(endpoint.get("value"), str):
            endpoint["value"] = {"column": endpoint["value"]}
    return prepared


def _frozen(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _frozen(part) for key, part in value.items()}
    if isinstance(value, list):
        return tuple(_frozen(part) for part in value)
    return value


def _sound_sections(data: dict[str, Any], faulty: set[str]) -> Plan:
    """Return a plan without its faulty sections, for the rules that can do without them."""
    sound = {
        section: TypeAdapter(field.annotation).validate_python(data[section])
        for section, field in Plan.model_fields.items()
        if section in data and section not in faulty
    }
    plan = Plan.model_construct(**sound)
    for section in faulty:
        plan.__dict__.pop(section, None)  # a default must not pass for what the author wrote
    return plan
