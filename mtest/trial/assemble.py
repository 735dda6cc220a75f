"""From a plan and its data files to one frozen `Trial`, or to everything that is wrong with the data."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np

from mtest.errors import DataError
from mtest.plan.records import Endpoint, Family, Plan
from mtest.plan.wording import item, shown
from mtest.trial.arrays import Trial
from mtest.trial.cautions import about_endpoint, lone_arms, stripped_cells
from mtest.trial.cells import is_missing
from mtest.trial.long import LongData, chosen_rows, keyed
from mtest.trial.outcomes import as_numbers, endpoint_data
from mtest.trial.sources import Table, read_table
from mtest.trial.subjects import analysis_sets, arm_index, by_identifier, exchange_cells


def assemble(plan: Plan, folder: Path) -> tuple[Trial, dict[str, str]]:
    """Return the study as observed, and the hash of each data file.

    Parameters
    ----------
    plan : Plan
        A plan that keeps the rules of `mtest.plan.rules`.
    folder : Path
        Where the plan's relative paths start: the folder of the plan file.

    Returns
    -------
    trial : Trial
        Every subject of the subject table, in the order of the identifiers as plain text, whatever the order of the
        file. Missing values are NaN, unless the endpoint's rule fills them.
    hashes : dict
        File as the plan names it -> SHA-256 of its bytes.

    Raises
    ------
    DataError
        Every fault that could be found, a sentence each with file and rows.

    Notes
    -----
    White space around cells is stripped, and a warning says so where it touches labels; labels are otherwise compared
    exactly. `mtest.trial.sources.MISSING_TOKENS` names the cells that are missing values.
    """
    faults: list[str] = []
    hashes: dict[str, str] = {}
    subjects = _subjects(plan, folder, faults, hashes)
    ids = tuple(subjects.frame[plan.data.subject]) if subjects else ()
    tables = [_read(folder, spec.file, faults, hashes) for spec in plan.data.long]
    if subjects is None:
        raise _error(faults)
    long = tuple(
        data
        for table, spec in zip(tables, plan.data.long)
        if table and (data := keyed(table, spec, subject=plan.data.subject, ids=ids, faults=faults))
    )
    arm = arm_index(subjects, plan.randomisation, faults)
    cells = exchange_cells(subjects, plan.randomisation, faults)
    sets = analysis_sets(subjects, plan, faults)
    observed = [
        _observed(index, plan, subjects, long, faults, all_read=len(long) == len(plan.data.long))
        for index in range(len(plan.endpoint))
    ]
    if arm is None or cells is None or any(values is None for values in observed) or faults:
        raise _error(faults)
    faults += _arms_without_data(plan, observed, arm, sets)
    if faults:
        raise _error(faults)

    n_arms = len(plan.randomisation.arms)
    for array in (arm, cells.stratum, cells.cell, *sets.values()):
        array.setflags(write=False)
    trial = Trial(
        subject_ids=ids,
        arms=plan.randomisation.arms,
        arm=arm,
        stratum=cells.stratum,
        stratum_names=cells.stratum_names,
        cell=cells.cell,
        endpoints=tuple(
            endpoint_data(endpoint, values, arm, n_arms) for endpoint, values in zip(plan.endpoint, observed)
        ),
        sets=sets,
        warnings=tuple(
            [
                *_stripped(plan, subjects, long),
                *lone_arms(cells, arm, plan),
                *(
                    warning
                    for endpoint, values in zip(plan.endpoint, observed)
                    for warning in about_endpoint(endpoint, values, arm, plan)
                ),
            ]
        ),
    )
    return trial, hashes


def compared_arms(family: Family, arms: tuple[str, ...]) -> tuple[str, ...]:
    """Return the arms that a family compares, in the plan's order."""
    if isinstance(family.comparisons, str):
        return arms
    return tuple(arm for arm in arms if any(arm in pair for pair in family.comparisons))


def _subjects(plan: Plan, folder: Path, faults: list[str], hashes: dict[str, str]) -> Table | None:
    table = _read(folder, plan.data.subjects, faults, hashes)
    return by_identifier(table, plan.data.subject, faults) if table else None


def _read(folder: Path, name: str, faults: list[str], hashes: dict[str, str]) -> Table | None:
    try:
        table = read_table(folder / name, name)
    except DataError as error:
        faults.extend(error.faults)
        return None
    hashes[name] = table.sha256
    return table


def _observed(
    index: int, plan: Plan, subjects: Table, long: tuple[LongData, ...], faults: list[str], *, all_read: bool
) -> np.ndarray | None:
    """Return (subject,) float64 of one endpoint before any filling; None where its values were not found."""
    endpoint = plan.endpoint[index]
    where = item("endpoint", index, endpoint.name)
    n_subjects = len(subjects.frame)
    if endpoint.value.parameter:
        found = chosen_rows(endpoint, long, faults, where=where, all_read=all_read)
        if found is None:
            return None
        data, rows = found
        table, position = data.table, data.position[rows]
    else:
        table, position, rows = subjects, np.arange(n_subjects), np.arange(n_subjects)
    cells = table.column(endpoint.value.column, faults, purpose=where)
    if cells is None:
        return None
    if _is_used(endpoint, plan) and is_missing(cells.iloc[rows]).all():
        faults.append(_all_missing(endpoint, table, where))
    values = np.full(n_subjects, np.nan)
    values[position] = as_numbers(cells.iloc[rows], endpoint, table, faults, where=where)
    return values


def _is_used(endpoint: Endpoint, plan: Plan) -> bool:
    return any(family.endpoints == "all" or endpoint.name in family.endpoints for family in plan.family)


def _all_missing(endpoint: Endpoint, table: Table, where: str) -> str:
    value = endpoint.value
    rows = f" for parameter {shown(value.parameter)} at visit {shown(value.visit)}" if value.parameter else ""
    return (
        f"{table.name}: column {shown(value.column)} must hold at least one value{rows} ({where}); got none. "
        "Name another column, or take the endpoint out of the plan."
    )


def _arms_without_data(
    plan: Plan, observed: list[np.ndarray], arm: np.ndarray, sets: dict[str, np.ndarray]
) -> Iterator[str]:
    arms = plan.randomisation.arms
    for number, family in enumerate(plan.family):
        inside = sets[family.analysis_set] if family.analysis_set else np.ones(len(arm), bool)
        for index, endpoint in enumerate(plan.endpoint):
            if family.endpoints != "all" and endpoint.name not in family.endpoints:
                continue
            for name in compared_arms(family, arms):
                members = inside & (arm == arms.index(name))
                fillable = endpoint.missing != "available" and not np.isnan(observed[index]).all()
                if not fillable and np.isnan(observed[index][members]).all():
                    within = f" within analysis set {shown(family.analysis_set)}" if family.analysis_set else ""
                    yield (
                        f"{item('endpoint', index, endpoint.name)} must have at least one value in each arm that "
                        f"{item('family', number, family.name)} compares; got none in arm {shown(name)}{within}. "
                        "Correct the data, or take the endpoint or the arm out of the family."
                    )


def _stripped(plan: Plan, subjects: Table, long: tuple[LongData, ...]) -> Iterator[str]:
    randomisation = plan.randomisation
    keys = (plan.data.subject, randomisation.arm, *randomisation.strata, randomisation.block, randomisation.set)
    yield from stripped_cells(subjects, keys)
    for data in long:
        yield from stripped_cells(data.table, (str(data.who.name), str(data.parameter.name), str(data.visit.name)))


def _error(faults: list[str]) -> DataError:
    # Endpoints that share a column or a parameter share its faults.
    return DataError(list(dict.fromkeys(faults)))
