"""One script, one run: python tests/bench/run.py [FILE]. Ratios within the run; absolute times mean little.

Every contender has both cores: the engine by its own workers, the others as two processes that do half each.
"""

from __future__ import annotations

import os
import platform
import subprocess
import sys
from pathlib import Path
from statistics import median

for variable in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[variable] = "1"  # one BLAS thread per worker, for every contender

sys.path.insert(0, str(Path(__file__).parent))
import joblib  # noqa: E402, the thread limits above must stand before numpy is imported
import numpy  # noqa: E402
import scipy  # noqa: E402
import workloads  # noqa: E402
from threadpoolctl import threadpool_info  # noqa: E402

WORKERS = 2
ROUNDS = 5
NAMES = {
    "floor": "floor, a word per subject",
    "packed floor": "floor, packed keys",
    "loop": "hand-written NumPy loop",
    "scipy": "scipy permutation_test, vectorised",
}
DRAWS = {"engine": 102_400, "floor": 51_200, "loop": 1_500, "scipy": 1_000}
MEMORY = """
import resource, sys
sys.path.insert(0, {folder!r})
import workloads
workloads.engine("W1", {draws}, {workers})
print(max(resource.getrusage(who).ru_maxrss for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)) / 1024)
"""


def both_cores(contender, workload: str, draws: int) -> float:
    """Return the summed rate of two processes that run at the same time, start-up left out."""
    rates = joblib.Parallel(n_jobs=WORKERS)(joblib.delayed(contender)(workload, draws) for _ in range(WORKERS))
    return sum(rates)


def measure_w1(workload: str) -> dict[str, list[float]]:
    """Return draws per second of each contender, a value a round, the contenders taking turns."""
    contenders = {
        "engine": lambda: workloads.engine(workload, DRAWS["engine"], WORKERS),
        "floor": lambda: both_cores(workloads.floor_words, workload, DRAWS["floor"]),
        "packed floor": lambda: both_cores(workloads.floor_packed, workload, DRAWS["floor"]),
        "loop": lambda: both_cores(workloads.loop, workload, DRAWS["loop"]),
        "scipy": lambda: both_cores(workloads.scipy_vectorised, workload, DRAWS["scipy"]),
    }
    for run in contenders.values():
        run()  # warm: imports, caches, processes
    rates: dict[str, list[float]] = {name: [] for name in contenders}
    for _ in range(ROUNDS):
        for name, run in contenders.items():
            rates[name].append(run())
    return rates


def peak_memory(draws: int, workers: int) -> float:
    """Return the peak resident memory in MB of the engine on W1, in a process of its own."""
    code = MEMORY.format(folder=str(Path(__file__).parent), draws=draws, workers=workers)
    return float(subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout)


def ratio(rates: dict[str, list[float]], top: str, bottom: str) -> str:
    """Return the median over rounds of one rate over another, with its range."""
    values = [a / b for a, b in zip(rates[top], rates[bottom])]
    return f"{median(values):.2f} ({min(values):.2f} to {max(values):.2f})"


def main(path: Path) -> None:
    """Measure and write the table."""
    blas = ", ".join(
        sorted({f"{i['internal_api']} {i['version']}" for i in threadpool_info() if i["user_api"] == "blas"})
    )
    lines = [
        "# Performance",
        "",
        f"Python {platform.python_version()}, numpy {numpy.__version__}, scipy {scipy.__version__}, {blas}; "
        f"{WORKERS} workers, one BLAS thread each; median of {ROUNDS} rounds in one run, range in brackets. "
        "Made by tests/bench/run.py.",
        "",
        "W1: 600 subjects, 4 arms, 40 continuous endpoints without missing values, Welch, each arm against the "
        "reference, 100,000 draws. Floor: raw bits, one selection over all subjects, and the engine's own matrix "
        "products, nothing else; with one 64-bit word per subject, as the goal was set, and with the engine's packed "
        "16-bit keys. With equal arms Welch's denominator needs no sums of squares, so engine and floors make half the "
        "products; with unequal arms they make them all.",
        "",
        "| workload | contender | draws per second | engine's rate over it | goal |",
        "|---|---|---|---|---|",
    ]
    goals = {
        "floor": ">= 0.625 (1.6 x the floor's time)",
        "packed floor": "",
        "loop": ">= 30",
        "scipy": ">= 35",
    }
    for workload in ("W1", "W1, unequal arms"):
        rates = measure_w1(workload)
        lines.append(f"| {workload} | engine | {median(rates['engine']):,.0f} | | |")
        for name, goal in goals.items():
            shown = NAMES[name]
            lines.append(
                f"| {workload} | {shown} | {median(rates[name]):,.0f} | {ratio(rates, 'engine', name)} | {goal} |"
            )
        print("\n".join(lines[-5:]), flush=True)
    rates = {"engine": [], "products": []}
    for _ in range(ROUNDS):
        rates["engine"].append(workloads.engine("W2", 8_192, 1))
        rates["products"].append(workloads.products_only("W2", 4_096))
    lines += [
        "",
        "W2: 100 subjects, 2 arms, 10,000 endpoints, one worker: the engine over its matrix products alone "
        f"{ratio(rates, 'engine', 'products')}; goal >= 0.5.",
        "",
        "| W1 draws | workers | peak memory, MB (the largest process) |",
        "|---|---|---|",
    ]
    for draws in (100_000, 1_000_000):
        for workers in (1, WORKERS):
            lines.append(f"| {draws:,} | {workers} | {peak_memory(draws, workers):.0f} |")
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    print("\n".join(lines[-8:]))


if __name__ == "__main__":
    main(Path(sys.argv[1] if len(sys.argv) > 1 else "reports/performance/w1.md"))
