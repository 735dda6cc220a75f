"""The report's figures: the estimates, the way of each p, the null distribution and the correlation."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import LinearSegmentedColormap

from mtest.report import formats
from mtest.report.drawing import (
    ACCENT,
    INK,
    QUIET,
    RULE,
    Picture,
    canvas,
    quiet_axis,
    text_width,
    to_picture,
    wrap_text,
)
from mtest.report.facts import FamilyFacts, HypothesisFacts, shown_scale
from mtest.report.wording import procedure_in_words, uses_maximum

MOST_PANELS = 48  # endpoints drawn in the forest plots of a family
MOST_ROWS = 60  # hypotheses drawn in the picture of adjustments
MOST_SHADED = 240  # hypotheses beyond which correlations are counted, not shaded one by one
NAMED_ROWS = 60  # hypotheses whose rows the correlation picture still names by endpoint
SINGLE_ROWS = 20  # hypotheses whose rows it names one by one, with the arm
LONGEST_NAME = 60  # letters of a row's name
PANEL_WIDTH = 3.45  # inches; fits a telephone at its natural size
NAME_WIDTH = 1.3  # inches of it for the names of comparisons
BLUE_WHITE_ORANGE = LinearSegmentedColormap.from_list("mtest", ["#b35806", "#f7f7f5", ACCENT])


def draw_forest(family: FamilyFacts) -> tuple[tuple[str, tuple[Picture, ...]], ...]:
    """Return a small panel for each endpoint, by group: each endpoint keeps its own unit and axis.

    Beyond `MOST_PANELS` endpoints only those with the smallest adjusted p are drawn.
    """
    rows: dict[str, list[HypothesisFacts]] = {}
    for h in family.hypotheses:
        rows.setdefault(h.raw.endpoint, []).append(h)
    shown = list(rows)
    if len(shown) > MOST_PANELS:
        smallest = {name: min(_or_one(h.raw.p_adjusted) for h in rows[name]) for name in shown}
        chosen = set(sorted(shown, key=lambda name: smallest[name])[:MOST_PANELS])
        shown = [name for name in shown if name in chosen]
    places = {name: place for place, name in enumerate(rows)}
    groups: dict[str, list[Picture]] = {}
    for name in shown:
        key = f"{family.key}-forest-{places[name]}"
        groups.setdefault(rows[name][0].raw.group, []).append(_forest_panel(rows[name], key))
    return tuple((group, tuple(pictures)) for group, pictures in groups.items())


def draw_adjustment(family: FamilyFacts) -> Picture | None:
    """Return each hypothesis's way from its unadjusted to its adjusted p, on a log axis; None without a p to draw."""
    drawn = [h for h in family.hypotheses if h.raw.p_unadjusted > 0 and h.raw.p_adjusted > 0]
    if not drawn:
        return None
    drawn.sort(key=lambda h: (h.raw.p_adjusted, h.raw.step))
    n_all, drawn = len(drawn), drawn[:MOST_ROWS]
    with canvas(width=7.4, height=0.75 + 0.185 * len(drawn)) as figure:
        axes = figure.add_subplot()
        for row, h in enumerate(drawn):
            ends = h.raw.p_unadjusted, h.raw.p_adjusted
            colour = ACCENT if h.raw.rejected else QUIET
            axes.plot(ends, (row, row), color=colour, linewidth=1.1, alpha=0.75, solid_capstyle="butt", zorder=2)
            axes.plot(ends[0], row, "|", color=colour, markersize=6, markeredgewidth=1.2, zorder=3)
            _marker(axes, ends[1], row, h)
        axes.axvline(family.raw.alpha, color=INK, linewidth=0.8, linestyle=(0, (4, 3)), zorder=1)
        smallest = min(h.raw.p_unadjusted for h in drawn)
        axes.set_xscale("log")
        axes.set_xlim(min(smallest, family.raw.alpha) / 1.6, 1.35)
        axes.set_ylim(len(drawn) - 0.4, -1.6)
        _annotate(axes, formats.format_plain(family.raw.alpha), (family.raw.alpha, -1.1), side="left")
        # Names to the right: on a telephone the picture is seen first, the names by scrolling.
        axes.yaxis.tick_right()
        axes.set_yticks(range(len(drawn)), [f"{_short(h.raw.endpoint)}, {h.comparison}" for h in drawn])
        ticks = [10.0**power for power in range(math.floor(math.log10(smallest)) + 1, 1)]
        axes.set_xticks(ticks, [formats.format_plain(tick) for tick in ticks])
        axes.minorticks_off()
        axes.set_xlabel("p-value, log scale")
        axes.grid(axis="y", color=RULE, linewidth=0.4)
        axes.set_axisbelow(True)
        quiet_axis(axes)
        label = "; ".join(
            f"{h.raw.endpoint}, {h.comparison}: {h.p_unadjusted} to {h.p_adjusted}, {h.decision}" for h in drawn
        )
        part = f" The {len(drawn)} smallest of {n_all} are drawn." if n_all > len(drawn) else ""
        return to_picture(
            figure,
            key=f"{family.key}-adjustment",
            label=f"From unadjusted to adjusted p. {label}.",
            caption="What adjustment costs each hypothesis: from the unadjusted p (bar) to the adjusted p (dot; filled "
            "where rejected). Dashed: the family's level." + part,
        )


def draw_null(family: FamilyFacts) -> Picture | None:
    """Return the null distribution of the maximum with the observed statistics; None where there is none to draw."""
    null = family.raw.null
    observed = [_as_compared(h, family.raw.alternative) for h in family.hypotheses]
    finite = [value for value in observed if math.isfinite(value)]
    if null is None or not np.sum(null.counts):
        return None
    edges, share = np.asarray(null.edges, float), null.counts / np.sum(null.counts)
    inner = np.isfinite(edges)
    filled = edges[:-1][(null.counts > 0) & inner[:-1]]
    right = max([float(filled[-1]), null.critical if math.isfinite(null.critical) else 0.0, *finite]) * 1.04
    left = float(filled[0]) if filled[0] < 0 else 0.0
    last = edges[inner][-1]
    edges = np.where(inner, edges, max(right, last + (edges[1] - edges[0])))
    share, edges = _coarser(share, edges)
    with canvas(width=4.7, height=2.5) as figure:
        axes = figure.add_subplot()
        axes.stairs(share, edges, fill=True, color="#c9d7e0", linewidth=0)
        top = float(share.max())
        for h, value in zip(family.hypotheses, observed, strict=True):
            if math.isnan(value):
                continue
            axes.plot(min(value, right), -0.09 * top, **_look(h, "D" if math.isinf(value) else "o", 4.2))
        if math.isfinite(null.critical):
            axes.axvline(null.critical, ymin=0.12, color=INK, linewidth=0.8, linestyle=(0, (4, 3)))
            said = f"critical value {formats.format_number(null.critical, 2)}"
            _annotate(axes, said, (null.critical, top * 1.07), side="right")
        axes.axhline(0, color=QUIET, linewidth=0.6)
        axes.set_xlim(left, right)
        axes.set_ylim(-0.17 * top, 1.14 * top)
        axes.set_yticks([])
        axes.set_xlabel("statistic" if family.raw.alternative == "better" else "statistic, without its sign")
        quiet_axis(axes)
        beyond = sum(value >= null.critical for value in observed)
        aside = ""
        if not uses_maximum(family.raw.procedure):
            aside = f" Shown for comparison: {procedure_in_words(family.raw.procedure)} makes no use of it."
        infinite = " Diamonds: infinite, drawn at the edge." if any(math.isinf(value) for value in observed) else ""
        return to_picture(
            figure,
            key=f"{family.key}-null",
            label=f"Distribution of the largest statistic under {formats.format_count(family.raw.n_draws)} "
            f"relabellings; critical value {formats.format_number(null.critical, 2)}; {beyond} of "
            f"{len(observed)} observed statistics lie at or beyond it.",
            caption="Shaded: the largest statistic of the family in each relabelling, that is, what the best-looking "
            "hypothesis reaches when no arm does anything. Dots: the observed statistics, filled where rejected. "
            "Dashed: the value a single-step test asks of every hypothesis; a step-down procedure asks less of the "
            "later ones." + infinite + aside,
        )


def draw_correlation(family: FamilyFacts) -> Picture | None:
    """Return the correlation between the null statistics as a shaded square; None where there is none."""
    matrix = family.raw.correlation
    if matrix is None or len(matrix) < 2:
        return None
    m = len(matrix)
    off = np.asarray(matrix, float)[~np.eye(m, dtype=bool)]
    off = off[np.isfinite(off)]
    middle = formats.format_number(float(np.median(np.abs(off))) if off.size else math.nan, 2)
    label = f"Correlation between {m} statistics under relabelling; the median size of a correlation is {middle}."
    if m > MOST_SHADED:
        return _count_correlations(off, middle, label, family.key)
    names = _correlation_names(family) if m <= NAMED_ROWS else ()
    with canvas(width=1.0, height=1.0) as figure:
        side = max(3.6, 0.165 * len(names))
        room = max((text_width(name) for name, _ in names), default=0.0)
        figure.set_size_inches(side + room + 1.2, side + 0.2)
        axes = figure.add_subplot()
        shades = np.clip(np.asarray(matrix, float), -1, 1)
        image = axes.imshow(shades, cmap=BLUE_WHITE_ORANGE, vmin=-1, vmax=1, interpolation="none")
        # Names to the right: on a telephone the square is seen first, the names by scrolling.
        axes.yaxis.tick_right()
        axes.set_yticks([place for _, place in names], [name for name, _ in names])
        axes.set_xticks([])
        groups = _runs([h.raw.group for h in family.hypotheses])
        for _, _, end in groups[:-1]:
            axes.axhline(end - 0.5, color="white", linewidth=1.2)
            axes.axvline(end - 0.5, color="white", linewidth=1.2)
        for spine in axes.spines.values():
            spine.set_visible(False)
        axes.tick_params(length=0)
        bar = figure.colorbar(image, ax=axes, location="left", shrink=0.85, ticks=[-1, -0.5, 0, 0.5, 1])
        bar.set_ticklabels([f"{formats.MINUS}1", f"{formats.MINUS}0.5", "0", "0.5", "1"])
        bar.outline.set_visible(False)
        return to_picture(
            figure,
            key=f"{family.key}-correlation",
            label=label,
            caption="Correlation between the statistics under relabelling, hypothesis by hypothesis in the order of "
            f"the results table; the median size is {middle}."
            + (_order_of_rows(family) if SINGLE_ROWS < m <= NAMED_ROWS else "")
            + (" White lines part the groups of endpoints." if len(groups) > 1 else ""),
        )


def _correlation_names(family: FamilyFacts) -> list[tuple[str, float]]:
    """The names of rows and where they stand: of each hypothesis, or where those are many, of each endpoint."""
    if len(family.hypotheses) > SINGLE_ROWS:
        runs = _runs([h.raw.endpoint for h in family.hypotheses])
        return [(_short(name, LONGEST_NAME), (start + end - 1) / 2) for name, start, end in runs]
    one_reference = len({h.raw.reference for h in family.hypotheses}) == 1
    names = [
        f"{_short(h.raw.endpoint, LONGEST_NAME)}, {h.raw.arm if one_reference else h.comparison}"
        for h in family.hypotheses
    ]
    return [(name, float(place)) for place, name in enumerate(names)]


def _order_of_rows(family: FamilyFacts) -> str:
    if len(family.comparisons) < 2:
        return ""
    return f" Rows of one endpoint, from top to bottom: {'; '.join(family.comparisons)}."


def _count_correlations(off: np.ndarray, middle: str, label: str, key: str) -> Picture:
    """How often each size of correlation occurs, where there are too many for a square of shades."""
    with canvas(width=4.7, height=2.2) as figure:
        axes = figure.add_subplot()
        axes.hist(off, bins=np.linspace(-1, 1, 81), color="#c9d7e0")
        axes.axvline(0, color=INK, linewidth=0.7)
        axes.set_xlim(-1, 1)
        axes.set_yticks([])
        axes.set_xlabel("correlation between two statistics")
        quiet_axis(axes)
        caption = f"How often each correlation between two statistics occurs under relabelling; median size {middle}."
        return to_picture(figure, key=f"{key}-correlation", label=label, caption=caption)


def _forest_panel(rows: list[HypothesisFacts], key: str) -> Picture:
    """One endpoint: its comparisons from top to bottom, the null line, intervals and decision marks."""
    effect = rows[0].raw.effect
    scale = shown_scale(effect)
    null = effect.null * scale
    ends = [value * scale for h in rows for value in (h.raw.effect.estimate, h.raw.effect.low, h.raw.effect.high)]
    finite = [value for value in ends if math.isfinite(value)] + [null]
    room = (max(finite) - min(finite)) * 0.07 or 1.0
    left, right = min(finite) - room, max(finite) + room
    with canvas(width=PANEL_WIDTH, height=1.0) as figure:
        title = _forest_axis(rows[0])
        names = [wrap_text(h.comparison, room=NAME_WIDTH) for h in rows]
        lines = max(name.count("\n") for name in names)
        figure.set_figheight(0.48 + 0.14 * (title.count("\n") + 1) + (0.235 + 0.14 * lines) * len(rows))
        axes = figure.add_subplot()
        axes.axvline(null, color=INK, linewidth=0.7, zorder=1)
        for row, h in enumerate(rows):
            _forest_row(axes, row, h, scale, (left, right))
        axes.set_xlim(left, right)
        axes.set_ylim(len(rows) - 0.4, -0.6)
        axes.set_yticks(range(len(rows)), names)
        if len(finite) > 1:
            axes.locator_params(axis="x", nbins=5)
        else:  # nothing was estimated: an axis of numbers would pretend there is a scale
            axes.set_xticks([null])
        axes.set_xlabel(title, loc="right", multialignment="left")  # may reach below the names
        quiet_axis(axes)
        label = "; ".join(f"{h.comparison}: {h.estimate} ({h.interval}), {h.decision}" for h in rows)
        name = rows[0].raw.endpoint
        return to_picture(figure, key=key, label=f"{name}, {rows[0].measure}. {label}.", caption=name)


def _forest_row(axes: Axes, row: int, h: HypothesisFacts, scale: float, limits: tuple[float, float]) -> None:
    estimate, low, high = (value * scale for value in (h.raw.effect.estimate, h.raw.effect.low, h.raw.effect.high))
    colour = ACCENT if h.raw.rejected else QUIET
    if not (math.isnan(low) or math.isnan(high)):
        shown = np.clip((low, high), *limits)
        axes.plot(shown, (row, row), color=colour, linewidth=1.3, solid_capstyle="butt", zorder=2)
        for end, at, sign in ((low, limits[0], "<"), (high, limits[1], ">")):
            if math.isinf(end):
                axes.plot(at, row, sign, color=colour, markersize=5, clip_on=False, zorder=3)
    if math.isfinite(estimate):
        _marker(axes, estimate, row, h)
    elif math.isnan(estimate):
        axes.text(limits[1], row - 0.22, "not estimable", ha="right", va="center", color=QUIET, fontsize=7.5)


def _forest_axis(h: HypothesisFacts) -> str:
    """The measure and the better side, in one line where the panel has room for it."""
    if "better" in h.raw.effect.measure:
        side = "right of the line is better"
    else:
        side = f"{'right' if h.raw.better == 'higher' else 'left'} is better"
    room = PANEL_WIDTH - 0.15
    if text_width(line := f"{h.measure}; {side}") <= room:
        return line
    return wrap_text(f"{h.measure};", room=room) + f"\n{side}"


def _look(h: HypothesisFacts, sign: str, size: float) -> dict:
    """Filled where rejected, open where not: told by shape first, by colour second."""
    face, edge = (ACCENT, ACCENT) if h.raw.rejected else ("white", QUIET)
    return {
        "marker": sign,
        "markersize": size,
        "markerfacecolor": face,
        "markeredgecolor": edge,
        "markeredgewidth": 1.1,
        "linestyle": "none",
        "clip_on": False,
        "zorder": 4,
    }


def _annotate(axes: Axes, text: str, at: tuple[float, float], *, side: str) -> None:
    """Text beside an upright line, a little off it; `side` is where the text begins or ends."""
    away = 4 if side == "left" else -4
    axes.annotate(text, at, xytext=(away, 0), textcoords="offset points", ha=side, va="center")


def _marker(axes: Axes, x: float, y: float, h: HypothesisFacts) -> None:
    axes.plot(x, y, **_look(h, "o", 5.0))


def _as_compared(h: HypothesisFacts, alternative: str) -> float:
    """The statistic as the maximum sees it: without its sign, or counting upwards in the tested arm's favour."""
    value = h.raw.statistic_value
    return (value if h.raw.better == "higher" else -value) if alternative == "better" else abs(value)


def _coarser(share: np.ndarray, edges: np.ndarray, most: int = 120) -> tuple[np.ndarray, np.ndarray]:
    """The histogram with bins put together until a screen can show them."""
    step = math.ceil(len(share) / most)
    starts = np.arange(0, len(share), step)
    merged = np.add.reduceat(share, starts)
    bounds = np.append(edges[starts], edges[-1])
    return merged / np.diff(bounds), bounds


def _runs(names: list[str]) -> list[tuple[str, int, int]]:
    """Runs of equal names as (name, start, end)."""
    runs: list[tuple[str, int, int]] = []
    for place, name in enumerate(names):
        if runs and runs[-1][0] == name:
            runs[-1] = (name, runs[-1][1], place + 1)
        else:
            runs.append((name, place, place + 1))
    return runs


def _short(name: str, most: int = 38) -> str:
    return name if len(name) <= most else name[: most - 1].rstrip() + "…"


def _or_one(p: float) -> float:
    return 1.0 if math.isnan(p) else p
