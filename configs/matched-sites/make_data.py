"""Invent the matched-sites study: `python configs/matched-sites/make_data.py OUTDIR` writes subjects.csv.

Nobody was treated: every number comes from raw integers of the generator below, written with fixed decimals.
"""

from __future__ import annotations

import csv
import sys
from pathlib import Path

import numpy as np
from scipy.stats import norm

SEED = 10
N_SETS = 10
ARMS = ("usual care", "guided exercise")
TIREDNESS = ("none", "a little", "some", "much")
HEADER = ("id", "set", "arm", "walk_change_m", "stand_ups_change", "stiffness_change", "tiredness")


def write(folder: Path) -> None:
    """Write subjects.csv into a folder."""
    raw = np.random.PCG64DXSM(SEED)

    def uniform(n: int) -> np.ndarray:
        return ((raw.random_raw(n) >> np.uint64(11)).astype(float) + 0.5) * 2.0**-53

    first_is_treated = uniform(N_SETS) < 0.5
    treated = np.column_stack([first_is_treated, ~first_is_treated]).ravel().astype(int)
    pair = np.repeat(norm.ppf(uniform(N_SETS)), 2)  # what the two of a set have in common
    noise = norm.ppf(uniform(2 * N_SETS * 4)).reshape(4, -1)
    walk = np.round(8 + 34 * treated + 18 * pair + 17 * noise[0])
    stand_ups = np.round(0.6 + 1.9 * treated + 1.0 * pair + 1.3 * noise[1])
    stiffness = np.round(-0.4 - 0.5 * treated - 0.7 * pair + 1.1 * noise[2], 1)
    tiredness = np.searchsorted(norm.ppf((0.25, 0.55, 0.85)), -0.3 * treated + 0.5 * pair + 0.85 * noise[3])

    folder.mkdir(parents=True, exist_ok=True)
    with (folder / "subjects.csv").open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(HEADER)
        for i in range(2 * N_SETS):
            writer.writerow(
                (f"{i + 1:03d}", f"set {i // 2 + 1:02d}", ARMS[treated[i]], f"{walk[i] + 0.0:.0f}",
                 f"{stand_ups[i] + 0.0:.0f}", f"{stiffness[i] + 0.0:.1f}", TIREDNESS[tiredness[i]])
            )  # fmt: skip


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit("usage: python make_data.py OUTDIR")
    write(Path(sys.argv[1]))
