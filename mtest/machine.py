"""Facts about the run's surroundings: versions, platform, BLAS, hashes. The only place that reads the clock."""

from __future__ import annotations

import platform
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path

from threadpoolctl import threadpool_info

from mtest.plan.read import PlanFile
from mtest.relabel.keys import BLOCK_DRAWS, GENERATOR
from mtest.results import RunFacts

_PACKAGES = ("numpy", "scipy", "pandas", "statsmodels", "joblib", "pydantic")


def run_facts(plan_file: PlanFile, data_sha256: dict[str, str]) -> RunFacts:
    """Return what a second person needs to get the same digits, and the time."""
    draws = plan_file.plan.draws
    return RunFacts(
        mtest_version=version("mtest"),
        versions=(("python", platform.python_version()), *((name, version(name)) for name in _PACKAGES)),
        platform=platform.platform(),
        cpu=_cpu(),
        blas=_blas(),
        seed=draws.seed,
        generator=GENERATOR,
        block_draws=BLOCK_DRAWS,
        draws_at_least=draws.at_least,
        draws_at_most=draws.at_most,
        exact_limit=draws.exact_limit,
        plan_file=plan_file.path.name,
        plan_sha256=plan_file.sha256,
        data_sha256=tuple(sorted(data_sha256.items())),
        finished_utc=datetime.now(UTC).isoformat(timespec="seconds"),
    )


def _cpu() -> str:
    """Return the processor's name; /proc knows it where platform does not."""
    try:
        lines = Path("/proc/cpuinfo").read_text().splitlines()
    except OSError:
        return platform.processor() or platform.machine()
    names = [line.split(":", 1)[1].strip() for line in lines if line.startswith("model name")]
    return names[0] if names else platform.machine()


def _blas() -> str:
    """Return the BLAS in use, and that one thread per worker was set."""
    found = sorted(
        {
            f"{info['internal_api']} {info.get('version')} ({info.get('architecture', 'unknown kernel')})"
            for info in threadpool_info()
            if info["user_api"] == "blas"
        }
    )
    return f"{', '.join(found) or 'unknown'}; one thread per worker"
