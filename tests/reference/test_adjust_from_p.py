"""Procedures on p-values alone: published examples, closed tests by brute force, and statsmodels."""

from __future__ import annotations

import gc
from itertools import combinations

import numpy as np
import pytest
from statsmodels.stats.multitest import multipletests

from mtest.adjust.pvalues import PROCEDURES, adjust_from_p


@pytest.fixture(scope="module", autouse=True)
def frozen_heap():
    """statsmodels collects garbage on every Holm call, 0.1 s with the test session's heap: set the heap aside."""
    gc.freeze()
    yield
    gc.unfreeze()


@pytest.mark.parametrize("procedure", ["Bonferroni", "Holm", "Hochberg", "Hommel", "Benjamini-Hochberg"])
def test_fifteen_p_values_rejected(source, procedure):
    """Bonferroni and Hochberg reject 3 at 0.05, Benjamini-Hochberg 4 (the paper's example)."""
    example = source("benjamini_hochberg_1995")
    adjusted = adjust_from_p(np.array(example["data"]["p"]), procedure=procedure)
    assert (adjusted <= 0.05).sum() == example["rejected"][procedure]


@pytest.mark.parametrize("procedure", ["Holm", "Hommel", "Benjamini-Hochberg", "Benjamini-Yekutieli"])
def test_fifteen_p_values_adjusted(source, printed, procedure):
    example = source("benjamini_hochberg_1995")
    adjusted = adjust_from_p(np.array(example["data"]["p"]), procedure=procedure)
    digits = example["printed"][procedure]
    assert list(adjusted[: len(digits)]) == [printed(text) for text in digits]


def test_fifteen_p_values_hochberg_adjusted(source, printed):
    """Printed from the fifth on: the first four equal Holm's."""
    adjusted = adjust_from_p(np.array(source("benjamini_hochberg_1995")["data"]["p"]), procedure="Hochberg")
    assert list(adjusted[4:9]) == [printed(text) for text in ("0.2211", "0.2682", "0.2682", "0.2752", "0.3213")]


@pytest.mark.parametrize("case", range(5))
@pytest.mark.parametrize("procedure", ["Holm", "Hochberg", "Hommel"])
def test_separating_vectors(source, case, procedure):
    vector = source("separating_vectors")["case"][case]
    assert adjust_from_p(np.array(vector["p"]), procedure=procedure) == pytest.approx(vector[procedure], abs=1e-12)


def _vectors(n: int, largest: int):
    """Return n vectors of 1 to `largest` p-values, every second one with ties; seed 11."""
    rng = np.random.default_rng(11)
    out = []
    for k in range(n):
        p = rng.uniform(size=rng.integers(1, largest + 1)) ** 2
        out.append(np.round(p, 1) if k % 2 else p)
    return out


def _closure(p: np.ndarray, local) -> np.ndarray:
    """Return the adjusted p-values of the closed test: the largest local p of all subsets that hold the hypothesis."""
    adjusted = np.zeros(len(p))
    for size in range(1, len(p) + 1):
        for subset in combinations(range(len(p)), size):
            inside = list(subset)
            adjusted[inside] = np.maximum(adjusted[inside], local(np.sort(p[inside])))
    return np.minimum(adjusted, 1.0)


def _bonferroni(p):
    return len(p) * p[0]


def _simes(p):
    return (len(p) * p / np.arange(1, len(p) + 1)).min()


def _sidak(p):
    return 1 - (1 - p[0]) ** len(p)


@pytest.mark.parametrize("procedure, local", [("Holm", _bonferroni), ("Hommel", _simes), ("Holm-Sidak", _sidak)])
def test_step_procedures_are_closed_tests(procedure, local):
    """Marcus, Peritz & Gabriel 1976: 400 random vectors of up to 7, half with ties, against all subsets."""
    for p in _vectors(400, 7):
        assert adjust_from_p(p, procedure=procedure) == pytest.approx(_closure(p, local), abs=1e-12)


@pytest.mark.parametrize("procedure, local", [("Holm", _bonferroni), ("Hommel", _simes)], ids=["Holm", "Hommel"])
def test_fifteen_p_values_closed_test(source, procedure, local):
    """All 2^15 - 1 intersections."""
    p = np.array(source("benjamini_hochberg_1995")["data"]["p"])
    assert adjust_from_p(p, procedure=procedure) == pytest.approx(_closure(p, local), abs=1e-12)


def test_hochberg_step_up_by_hand():
    """Hochberg 1988: p_(k) adjusted is the smallest (m - j + 1) p_(j) over j >= k."""
    for p in _vectors(400, 7):
        order, m = np.argsort(p), len(p)
        stepped = (m - np.arange(m)) * p[order]
        wanted = np.empty(m)
        wanted[order] = np.minimum(1.0, np.minimum.accumulate(stepped[::-1])[::-1])
        assert adjust_from_p(p, procedure="Hochberg") == pytest.approx(wanted, abs=1e-12)


@pytest.mark.filterwarnings("ignore:divide by zero encountered in log1p:RuntimeWarning")
@pytest.mark.parametrize("procedure", ["Holm", *PROCEDURES])
def test_equals_statsmodels(procedure):
    """statsmodels' own word for the procedure is typed here again, so a swapped entry of the table shows."""
    word = {
        "Bonferroni": "bonferroni",
        "Sidak": "sidak",
        "Holm": "holm",
        "Holm-Sidak": "holm-sidak",
        "Hochberg": "simes-hochberg",
        "Hommel": "hommel",
        "Benjamini-Hochberg": "fdr_bh",
        "Benjamini-Yekutieli": "fdr_by",
    }[procedure]
    for p in _vectors(200, 20):
        wanted = multipletests(p, method=word)[1]
        assert adjust_from_p(p, procedure=procedure) == pytest.approx(wanted, abs=1e-12)
