"""Invent the neck-pain demonstration study: `python configs/neck-pain/make_data.py OUTDIR` writes its two CSV files.

Nobody was treated: every number comes from the generator below. Only raw integers of the generator are used, because
its raw stream is stable across library versions, and every value is written with fixed decimals: the same bytes
anywhere. The seed was chosen so that what was planted (effects, more dropout on 4 %) can be seen in the sample.
"""

from __future__ import annotations

import csv
import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from scipy.stats import norm

SEED = 56
N_SUBJECTS, N_SITES, BLOCK = 312, 8, 8
ARMS = ("vehicle", "1 %", "2 %", "4 %")
SEVERITIES = ("moderate", "severe")
SITE_SHARES = (0.19, 0.16, 0.14, 0.13, 0.12, 0.10, 0.09, 0.07)
DROPOUT = {"W4": 0.015, "W8": 0.025, "W12": 0.035}  # share of those still in the study who leave before the visit
DROPOUT_HIGHEST_DOSE = 2.0  # times the others' dropout
ISOLATED_MISSING = 0.012
VISIT_SHARE = {"W4": 0.65, "W8": 0.85, "W12": 1.0}  # of the effect and change at week 12


@dataclass(frozen=True, kw_only=True)
class Scale:
    """A measured quantity: its range, decimals, spread, mean change, and true effects of the doses in SD of change."""

    visits: tuple[str, ...] = ("W12",)
    low: float
    high: float
    decimals: int
    start: float
    start_sd: float
    change: float
    change_sd: float
    effects: tuple[float, float, float]  # of 1 %, 2 % and 4 %; in the direction of benefit
    benefit: int  # +1: higher is better, -1: lower is better


SCALES = {
    "PAINREST": Scale(visits=("W4", "W8", "W12"), low=0, high=100, decimals=0, start=58, start_sd=13, change=-14,
                      change_sd=19, effects=(0.20, 0.72, 0.90), benefit=-1),
    "PAINMOVE": Scale(low=0, high=100, decimals=0, start=64, start_sd=13, change=-13, change_sd=20,
                      effects=(0.20, 0.66, 0.85), benefit=-1),
    "WORSTPAIN": Scale(low=0, high=10, decimals=1, start=7.1, start_sd=1.1, change=-1.3, change_sd=1.9,
                       effects=(0.15, 0.62, 0.80), benefit=-1),
    "DISABILITY": Scale(low=0, high=100, decimals=0, start=42, start_sd=12, change=-8, change_sd=12,
                        effects=(0.10, 0.40, 0.70), benefit=-1),
    "ROTATION": Scale(low=10, high=90, decimals=0, start=56, start_sd=9, change=2, change_sd=8,
                      effects=(0.0, 0.0, 0.0), benefit=1),
    "ENDURANCE": Scale(low=0, high=300, decimals=0, start=62, start_sd=24, change=6, change_sd=22,
                       effects=(0.0, 0.0, 0.0), benefit=1),
    "QOL": Scale(low=0, high=100, decimals=0, start=55, start_sd=14, change=5, change_sd=14,
                 effects=(0.05, 0.10, 0.25), benefit=1),
}  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class Grade:
    """A judged quantity: words or numbers from lowest to highest, cut from a normal scale at given shares."""

    words: tuple[str, ...]
    shares: tuple[float, ...]  # cumulative, without the last
    effects: tuple[float, float, float]
    benefit: int


GRADES = {
    "GLOBAL": Grade(
        words=("much worse", "worse", "slightly worse", "unchanged", "slightly better", "better", "much better"),
        shares=(0.03, 0.09, 0.20, 0.48, 0.74, 0.92), effects=(0.15, 0.60, 0.75), benefit=1),
    "SLEEP": Grade(words=("none", "mild", "moderate", "severe"), shares=(0.22, 0.55, 0.85),
                   effects=(0.0, 0.10, 0.20), benefit=-1),
    "TENDERNESS": Grade(words=("0", "1", "2", "3", "4"), shares=(0.10, 0.34, 0.70, 0.92),
                        effects=(0.0, 0.0, 0.0), benefit=-1),
    "RESCUE": Grade(words=("no", "yes"), shares=(0.58,), effects=(0.0, 0.15, 0.25), benefit=-1),
}  # fmt: skip
RESPONSE = 0.30  # share of the baseline pain at rest that a responder has lost
SKIN_SHARES = (0.02, 0.02, 0.03, 0.04)  # skin reaction at any time, by arm


class Stream:
    """Uniform and normal numbers from the raw integers of one generator."""

    def __init__(self, seed: int) -> None:
        self.raw = np.random.PCG64DXSM(seed)

    def uniform(self, n: int) -> np.ndarray:
        # The upper 53 bits, put half-way between the ends so that 0 and 1 never occur.
        return ((self.raw.random_raw(n) >> np.uint64(11)).astype(float) + 0.5) * 2.0**-53

    def normal(self, n: int) -> np.ndarray:
        return norm.ppf(self.uniform(n))


def randomise(stream: Stream) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return site, severity and arm of each subject in order of entry: permuted blocks within site x severity."""
    site = np.searchsorted(np.cumsum(SITE_SHARES)[:-1], stream.uniform(N_SUBJECTS))
    severity = (stream.uniform(N_SUBJECTS) < 0.42).astype(int)
    arm = np.zeros(N_SUBJECTS, dtype=int)
    for stratum in range(N_SITES * len(SEVERITIES)):
        members = np.flatnonzero(site * len(SEVERITIES) + severity == stratum)
        for start in range(0, len(members), BLOCK):
            block = np.repeat(np.arange(len(ARMS)), BLOCK // len(ARMS))[np.argsort(stream.uniform(BLOCK))]
            part = members[start : start + BLOCK]
            arm[part] = block[: len(part)]
    return site, severity, arm


def write(folder: Path) -> None:
    """Write subjects.csv and visits.csv into a folder."""
    stream = Stream(SEED)
    site, severity, arm = randomise(stream)
    entered = np.zeros(N_SITES, dtype=int)
    ids = []
    for place in site:
        entered[place] += 1
        ids.append(f"{place + 1:02d}{entered[place]:03d}")
    age = np.clip(np.round(49 + 12 * stream.normal(N_SUBJECTS)), 18, 79)
    sex = np.where(stream.uniform(N_SUBJECTS) < 0.63, "F", "M")
    state = stream.normal(N_SUBJECTS)  # how bad a person's neck is, in all scales
    course = stream.normal(N_SUBJECTS)  # how well a person recovers, in all scales
    last = _visits_attended(stream, arm)
    skin = stream.uniform(N_SUBJECTS) < np.array(SKIN_SHARES)[arm]
    rows = _scale_rows(stream, ids, severity, arm, state, course, last) + _grade_rows(stream, ids, arm, course, last)
    protocol_kept = (last == len(DROPOUT)) & (stream.uniform(N_SUBJECTS) < 0.95)

    folder.mkdir(parents=True, exist_ok=True)
    _csv(
        folder / "subjects.csv",
        ("id", "site", "severity", "arm", "age", "sex", "skin_reaction", "per_protocol"),
        [
            (ids[i], f"site {site[i] + 1}", SEVERITIES[severity[i]], ARMS[arm[i]], f"{age[i]:.0f}", sex[i],
             str(int(skin[i])), "Y" if protocol_kept[i] else "N")
            for i in range(N_SUBJECTS)
        ],
    )  # fmt: skip
    _csv(folder / "visits.csv", ("id", "parameter", "visit", "baseline", "value", "change"), sorted(rows))


def _visits_attended(stream: Stream, arm: np.ndarray) -> np.ndarray:
    """Return (subject,) the number of visits after baseline before a person left; all of them for most."""
    attended = np.zeros(N_SUBJECTS, dtype=int)
    staying = np.ones(N_SUBJECTS, dtype=bool)
    for share in DROPOUT.values():
        hazard = share * np.where(arm == len(ARMS) - 1, DROPOUT_HIGHEST_DOSE, 1.0)
        staying &= stream.uniform(N_SUBJECTS) >= hazard
        attended += staying
    return attended


def _scale_rows(stream, ids, severity, arm, state, course, last) -> list[tuple[str, ...]]:
    rows = []
    for name, scale in SCALES.items():
        worse = -scale.benefit
        start = scale.start + scale.start_sd * (
            worse * (0.6 * state + 0.5 * (severity - 0.42)) + 0.75 * stream.normal(N_SUBJECTS)
        )
        start = np.round(np.clip(start, scale.low, scale.high), scale.decimals)
        own = stream.normal(N_SUBJECTS)
        effect = np.array((0.0, *scale.effects))[arm] * scale.benefit
        for visit in scale.visits:
            noise = scale.benefit * (0.55 * course + 0.45 * own) + 0.70 * stream.normal(N_SUBJECTS)
            regression = -0.25 * (start - scale.start)
            change = VISIT_SHARE[visit] * (scale.change + scale.change_sd * effect) + regression
            value = np.round(np.clip(start + change + scale.change_sd * noise, scale.low, scale.high), scale.decimals)
            measured = _measured(stream, visit, last)
            for i in np.flatnonzero(last >= _order(visit)):
                texts = (f"{value[i]:.{scale.decimals}f}", f"{value[i] - start[i] + 0.0:.{scale.decimals}f}")
                if not measured[i]:
                    texts = ("", "")
                rows.append((ids[i], name, visit, f"{start[i]:.{scale.decimals}f}", *_unsigned_zero(texts)))
                if name == "PAINREST" and visit == "W12":
                    response = "yes" if value[i] <= (1 - RESPONSE) * start[i] else "no"
                    rows.append((ids[i], "RESPONDER", visit, "", response if measured[i] else "", ""))
    return rows


def _grade_rows(stream, ids, arm, course, last) -> list[tuple[str, ...]]:
    rows = []
    for name, grade in GRADES.items():
        effect = np.array((0.0, *grade.effects))[arm]
        latent = grade.benefit * (effect + 0.6 * course) + 0.8 * stream.normal(N_SUBJECTS)
        place = np.searchsorted(norm.ppf(grade.shares), latent)
        measured = _measured(stream, "W12", last)
        for i in np.flatnonzero(last >= _order("W12")):
            rows.append((ids[i], name, "W12", "", grade.words[place[i]] if measured[i] else "", ""))
    return rows


def _measured(stream: Stream, visit: str, last: np.ndarray) -> np.ndarray:
    return (stream.uniform(N_SUBJECTS) >= ISOLATED_MISSING) & (last >= _order(visit))


def _order(visit: str) -> int:
    return list(DROPOUT).index(visit) + 1


def _unsigned_zero(texts: tuple[str, ...]) -> tuple[str, ...]:
    return tuple(text.removeprefix("-") if text.strip("-0.") == "" else text for text in texts)


def _csv(path: Path, header: tuple[str, ...], rows: list[tuple[str, ...]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(header)
        writer.writerows(rows)


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit("usage: python make_data.py OUTDIR")
    write(Path(sys.argv[1]))
