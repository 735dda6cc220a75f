"""Simulated studies whose true hypotheses are known, and how often a family rejects one of them wrongly."""

from __future__ import annotations

from dataclasses import dataclass

import joblib
import numpy as np
from scipy.stats import binom

from mtest.family import Design, FamilySpec, judge_family

ALPHA = 0.05
DRAWS = 1024


@dataclass(frozen=True, slots=True, kw_only=True)
class Scenario:
    """A randomised study, drawn again and again.

    sizes : subjects per arm, the reference first
    shift, spread : per arm; the mean of the shifted endpoints, and the SD of all
    shifted : endpoints that the shift touches
    correlation : between any two endpoints
    law : "normal" or "skewed" (exponential margins by a normal copula, centred)
    strata : number of equally likely strata, within which a draw of the labels is made
    """

    name: str
    sizes: tuple[int, ...]
    shift: tuple[float, ...]
    spread: tuple[float, ...]
    n_endpoints: int = 3
    shifted: tuple[int, ...] = (0, 1, 2)
    correlation: float = 0.5
    law: str = "normal"
    strata: int = 1
    comparisons: str = "each vs reference"
    two_sided: bool = True

    def pairs(self) -> tuple[tuple[int, int], ...]:
        """Return (tested, reference) pairs of arms."""
        arms = range(len(self.sizes))
        if self.comparisons == "each vs reference":
            return tuple((k, 0) for k in arms if k)
        return tuple((b, a) for a in arms for b in arms if a < b)

    def true_hypotheses(self) -> np.ndarray:
        """Return (endpoint, pair) bool: the two arms do not differ on the endpoint's distribution."""
        return np.array(
            [
                [
                    self.spread[a] == self.spread[b] and (self.shift[a] == self.shift[b] or j not in self.shifted)
                    for a, b in self.pairs()
                ]
                for j in range(self.n_endpoints)
            ]
        )


def draw_study(scenario: Scenario, rng: np.random.Generator) -> tuple[Design, np.ndarray]:
    """Return a design and (subject, endpoint) values."""
    arm = rng.permutation(np.repeat(np.arange(len(scenario.sizes)), scenario.sizes))
    n, m = len(arm), scenario.n_endpoints
    common = rng.standard_normal((n, 1))
    z = np.sqrt(scenario.correlation) * common + np.sqrt(1 - scenario.correlation) * rng.standard_normal((n, m))
    if scenario.law == "skewed":
        from scipy.stats import norm

        z = -norm.logsf(z) - 1
    values = z * np.array(scenario.spread)[arm, None]
    touched = np.isin(np.arange(m), scenario.shifted)
    values = values + np.array(scenario.shift)[arm, None] * touched
    stratum = rng.integers(scenario.strata, size=n)
    values = values + 2.0 * stratum[:, None]
    names = tuple(f"arm {k}" for k in range(len(scenario.sizes)))
    return Design(arm=arm, cell=stratum, stratum=stratum, arms=names), values


def count_errors(scenario: Scenario, mode: str, *, studies: int, seed: int, n_jobs: int = -1) -> int:
    """Return in how many studies a true hypothesis is rejected; mode: "joint", "boole" or "all-arms"."""
    pieces = np.array_split(np.arange(studies), 32)
    return sum(
        joblib.Parallel(n_jobs=n_jobs)(joblib.delayed(_errors)(scenario, mode, list(piece), seed) for piece in pieces)
    )


def _errors(scenario: Scenario, mode: str, studies: list[int], seed: int) -> int:
    truth = scenario.true_hypotheses().ravel()
    wrong = 0
    for study in studies:
        design, values = draw_study(scenario, np.random.default_rng([seed, study]))
        spec = FamilySpec(
            values=values,
            statistic=("welch",) * scenario.n_endpoints,
            sign=(1,) * scenario.n_endpoints,
            pairs=scenario.pairs(),
            two_sided=scenario.two_sided,
            exchange="all-arms" if mode == "all-arms" else "within-pair",
            across_pairs="boole" if mode == "boole" else "joint",
            procedure="step-down max-T",
            alpha=ALPHA,
            at_least=DRAWS,
            at_most=DRAWS,
            seed=study,
            exact_limit=0,
        )
        wrong += bool(np.any(judge_family(design, spec).p_step_down[truth] <= ALPHA))
    return wrong


def upper_limit(studies: int, *, level: float = 0.999) -> float:
    """Return the error rate that a procedure at nominal level exceeds with probability 1 - level."""
    return float(binom.ppf(level, studies, ALPHA)) / studies


def _arms(name: str, sizes: tuple[int, ...], **more) -> list[Scenario]:
    """Return the complete null and three partial nulls of a study with several arms."""
    k = len(sizes)
    still, even = (0.0,) * k, (1.0,) * k
    last = (0.0,) * (k - 1)
    return [
        Scenario(name=f"{name}, no arm differs", sizes=sizes, shift=still, spread=even, **more),
        Scenario(name=f"{name}, last arm shifted 1.5 SD", sizes=sizes, shift=(*last, 1.5), spread=even, **more),
        Scenario(name=f"{name}, last arm spread x 4", sizes=sizes, shift=still, spread=(*even[1:], 4.0), **more),
    ]


TWO_ARMS = [
    Scenario(
        name=f"12:12, 5 endpoints, correlation {rho}, {label}",
        sizes=(12, 12),
        shift=(0.0, size),
        spread=(1.0, 1.0),
        n_endpoints=5,
        shifted=(0, 1),
        correlation=rho,
    )
    for rho in (0.0, 0.5, 0.9)
    for size, label in ((0.0, "no endpoint differs"), (1.5, "2 of 5 endpoints differ by 1.5 SD"))
]

SEVERAL_ARMS = [
    *_arms("3 arms 20:20:20", (20, 20, 20)),
    *_arms("3 arms 60:20:20", (60, 20, 20)),
    *_arms("3 arms 10:30:30", (10, 30, 30)),
    *_arms("4 arms 20 each", (20,) * 4),
    *_arms("4 arms 60:20:20:20", (60, 20, 20, 20)),
    *_arms("4 arms 15:40:40:40", (15, 40, 40, 40)),
    *_arms("3 arms 40:30:10", (40, 30, 10)),
    *_arms("4 arms 20 each, all pairs", (20,) * 4, comparisons="all pairs"),
    *_arms("4 arms 90:15:15:15, all pairs", (90, 15, 15, 15), comparisons="all pairs"),
    *_arms("4 arms 60:20:20:20, one-sided", (60, 20, 20, 20), two_sided=False),
    *_arms("4 arms 20 each, skewed", (20,) * 4, law="skewed"),
    *_arms("4 arms 30:20:20:20 in 6 strata", (30, 20, 20, 20), strata=6),
    *_arms("7 arms 15 each", (15,) * 7),
    *_arms("7 arms 90:15x6", (90, *(15,) * 6)),
    *_arms("7 arms 10:20x6", (10, *(20,) * 6)),
]
MODES = ("joint", "boole", "all-arms")
