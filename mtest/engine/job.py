"""A job: one family on one stream of labels, arranged so that a block of draws is a pure function of its number."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from mtest.engine.pair import PairPanel, build_pair_panel
from mtest.engine.several import SeveralPanel, build_several_panel
from mtest.relabel.sets import ReferenceSet
from mtest.relabel.sources import DrawnLabels, EnumeratedLabels

Panel = PairPanel | SeveralPanel

CHUNK_ROWS = 256  # hypotheses computed together: their statistics for one batch of draws stay in the L2 cache
# Working memory of a batch. One panel's arrays then fit a common L2 cache; all of a batch's do not, but numpy calls are
# long enough for threads to run side by side, which was worth 45 % on two cores (tests/bench).
BATCH_BYTES = 1 << 23


@dataclass(frozen=True, slots=True, kw_only=True)
class Hypotheses:
    """The hypotheses of a job, in any order.

    scores : (hypothesis) list of (subject of its set,) centred scores, NaN where missing; sign already applied
    statistic : per hypothesis
    set_index : per hypothesis, which reference set
    first, second : per hypothesis, local indices of the arms compared
    """

    scores: tuple[np.ndarray, ...]
    statistic: tuple[str, ...]
    set_index: tuple[int, ...]
    first: tuple[int, ...]
    second: tuple[int, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Job:
    """Panels in chunks, the chunks in the observed order (largest statistic first).

    observed : (hypothesis,) in observed order, after the absolute value if two-sided
    order : (hypothesis,) position in `Hypotheses` of each row
    signed : (hypothesis,) the signed statistics, in observed order
    bound : (hypothesis,) rounding bound of the observed statistics
    batch : draws computed at a time
    """

    labels: DrawnLabels | EnumeratedLabels
    chunks: tuple[tuple[Panel, ...], ...]
    chunk_rows: tuple[int, ...]
    two_sided: bool
    order: np.ndarray
    observed: np.ndarray
    signed: np.ndarray
    bound: np.ndarray
    batch: int


def build_job(
    hypotheses: Hypotheses,
    *,
    labels: DrawnLabels | EnumeratedLabels,
    strata: tuple[np.ndarray, ...],
    two_sided: bool,
) -> Job:
    """Return the job of a family: its statistics as observed, and panels ready for any block of draws.

    strata : per reference set, (subject of the set,) strata of the scores
    """
    everything = np.arange(len(hypotheses.scores))
    panels = _panels(hypotheses, everything, labels.sets, strata)
    signed, bound = _observe(panels, len(everything), labels.sets)
    observed = np.abs(signed) if two_sided else signed
    order = np.argsort(-observed, kind="stable")
    pieces = [order[i : i + CHUNK_ROWS] for i in range(0, len(order), CHUNK_ROWS)]
    return Job(
        labels=labels,
        chunks=tuple(tuple(_panels(hypotheses, piece, labels.sets, strata)) for piece in pieces),
        chunk_rows=tuple(len(piece) for piece in pieces),
        two_sided=two_sided,
        order=order,
        observed=observed[order],
        signed=signed[order],
        bound=bound[order],
        batch=_batch_size(len(pieces[0]), labels.sets, panels),
    )


def _panels(hypotheses: Hypotheses, chosen: np.ndarray, sets: tuple[ReferenceSet, ...], strata) -> list[Panel]:
    """Return panels of the chosen hypotheses; rows count within `chosen`."""
    groups: dict[tuple, list[int]] = {}
    for row, h in enumerate(chosen):
        complete = bool(np.isfinite(hypotheses.scores[h]).all())
        key = (hypotheses.set_index[h], hypotheses.first[h], hypotheses.second[h], hypotheses.statistic[h], complete)
        groups.setdefault(key, []).append(row)
    panels: list[Panel] = []
    for (set_index, first, second, statistic, _), rows in sorted(groups.items()):
        common = {
            "rows": np.array(rows),
            "statistic": statistic,
            "reference_set": sets[set_index],
            "set_index": set_index,
            "stratum": strata[set_index],
        }
        scores = np.stack([hypotheses.scores[chosen[row]] for row in rows])
        if len(sets[set_index].arms) == 2:
            panels.append(build_pair_panel(scores, **common))
        else:
            panels.append(build_several_panel(scores, first=first, second=second, **common))
    return panels


def _observe(panels: list[Panel], n: int, sets: tuple[ReferenceSet, ...]) -> tuple[np.ndarray, np.ndarray]:
    """Return the signed statistics of the labels as they were, and their rounding bounds."""
    signed, bound = np.empty(n), np.empty(n)
    for panel in panels:
        chosen = sets[panel.set_index]
        indicators = [(chosen.arm == k).astype(float)[None, :] for k in range(len(chosen.arms) - 1)]
        signed[panel.rows] = panel.compute(indicators)[:, 0]
        bound[panel.rows] = panel.bound(signed[panel.rows], indicators)
    return signed, bound


def _batch_size(rows: int, sets: tuple[ReferenceSet, ...], panels: list[Panel]) -> int:
    """Return a power of two of draws whose statistics, sums and labels fit the batch's memory."""
    widest = max(len(s.subjects) for s in sets)
    tallest = min(max(len(panel.stack) for panel in panels), 2 * CHUNK_ROWS)
    bytes_per_draw = 8 * (rows + tallest + 1.5 * widest)
    return int(2 ** np.clip(np.floor(np.log2(BATCH_BYTES / bytes_per_draw)), 4, 10))
