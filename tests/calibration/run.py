"""Run the error-rate calibrations and write their table: python tests/calibration/run.py [STUDIES] [FILE]."""

from __future__ import annotations

import sys
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))
from scenarios import ALPHA, DRAWS, MODES, SEVERAL_ARMS, TWO_ARMS, count_errors, upper_limit

SEED = 20261201


def main(studies: int, path: Path) -> None:
    """Write a Markdown table: one row per scenario, one column per way of making the null distribution."""
    limit = upper_limit(studies)
    lines = [
        "# Familywise error of step-down max-T",
        "",
        f"{studies:,} simulated studies per cell, {DRAWS:,} draws each, Welch, nominal {ALPHA}; seed {SEED}. "
        f"A rate above {limit:.4f} (the 99.9 % binomial limit at the nominal level) is marked !. Error: any true "
        "hypothesis rejected; a pair of arms of unequal spread is not a true hypothesis. "
        f"Made by tests/calibration/run.py.",
        "",
        "| scenario | joint | boole | all-arms |",
        "|---|---|---|---|",
    ]
    path.parent.mkdir(parents=True, exist_ok=True)
    # An interrupted run goes on: rows already in the file are kept.
    old = path.read_text(encoding="utf-8").splitlines() if path.exists() else []
    done = {line.split("|")[1].strip(): line for line in old if line.startswith("| ")}
    for scenario in TWO_ARMS + SEVERAL_ARMS:
        if scenario.name in done:
            lines.append(done[scenario.name])
            continue
        started = time.perf_counter()
        modes = ("joint",) if scenario in TWO_ARMS else MODES
        rates = [count_errors(scenario, mode, studies=studies, seed=SEED) / studies for mode in modes]
        cells = [f"{rate:.4f}{' !' if rate > limit else ''}" for rate in rates] + ["same"] * (3 - len(rates))
        lines.append(f"| {scenario.name} | {' | '.join(cells)} |")
        path.write_text("\n".join(lines) + "\n", encoding="utf-8")
        print(lines[-1], f"{time.perf_counter() - started:.0f} s", flush=True)


if __name__ == "__main__":
    main(
        int(sys.argv[1]) if len(sys.argv) > 1 else 3000,
        Path(sys.argv[2] if len(sys.argv) > 2 else "out/error-rates.md"),
    )
