"""One panel of a dot plot: means as markers, ranges of folds as lines, infinities beyond the edge."""

import math
import statistics
from dataclasses import dataclass

from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator

from steelyard.reports.cells import CellKind, format_cell
from steelyard.reports.comparing import Entry
from steelyard.reports.palette import FAINT, QUIET, FamilyMark, family_mark
from steelyard.reports.pooling import PooledScore
from steelyard.reports.wording import short_labels

__all__ = ["DotPanel", "draw_dots", "draw_marker", "scale_limits"]

# A value is off the scale when it lies further from the best than this many times the median does, or than this
# many times the range of the best candidate's folds: many near-ties at the top must not push out the rest.
_REACH = 6.0


@dataclass(frozen=True)
class DotPanel:
    """Scores of one kind, top to bottom; None where a candidate has no such score."""

    title: str
    rows: tuple[tuple[Entry, PooledScore | None], ...]


def scale_limits(scores: list[PooledScore]) -> tuple[float, float]:
    """Lowest and highest value that the scale shows.

    Candidates far behind would squeeze the rest into one line, so they may fall off the scale, on the worse
    side. More than half of the candidates always stay on it, since the median does.
    """
    finite = [item for item in scores if math.isfinite(item.value)]
    if not finite:
        return (0.0, 1.0)
    sign = -1.0 if finite[0].better == "higher" else 1.0
    values = [sign * item.value for item in finite]
    first = min(finite, key=lambda item: sign * item.value)
    best = sign * first.value
    reach = max(statistics.median(values) - best, first.highest - first.lowest)
    kept = [item for item in finite if sign * item.value <= best + _REACH * reach] if reach > 0 else finite
    ends = [end for item in kept for end in (item.lowest, item.highest) if math.isfinite(end)]
    low, high = min(ends), max(ends)
    room = 0.04 * (high - low) or 0.05 * abs(high) or 1.0
    return (low - room, high + room)


def draw_dots(axes: Axes, panel: DotPanel, *, show_names: bool, ticks: int) -> None:
    """Draw a panel with about so many ticks; names of candidates at its left where `show_names`."""
    present = [item for _, item in panel.rows if item is not None]
    low, high = scale_limits(present)
    has_edge = any(math.isinf(item.value) for item in present)
    # Beyond the rule there is no scale: only the candidates with an infinite score.
    edge = high + 0.30 * (high - low) if has_edge else high
    for index, (entry, item) in enumerate(panel.rows):
        if item is None:
            axes.text(low, index, " no score", va="center", fontsize=8, color=QUIET)
        elif math.isinf(item.value):
            _draw_infinite(axes, entry, item, index, high + 0.04 * (high - low))
        elif low <= item.value <= high:
            _draw_finite(axes, entry, item, index, (low, high))
        else:
            _draw_off_scale(axes, entry, item, index, (low, high))
    places = MaxNLocator(nbins=ticks, steps=[1, 2, 5, 10]).tick_values(low, high)
    axes.set_xticks([place for place in places if low <= place <= high])
    if has_edge:
        axes.axvline(high, color=QUIET, linewidth=0.6)
    axes.set_xlim(low, edge)
    axes.set_ylim(len(panel.rows) - 0.4, -0.6)
    names = [entry.candidate for entry, _ in panel.rows]
    labels = short_labels(names, 34)
    partial = {entry.candidate for entry, item in panel.rows if item is not None and not item.complete}
    shown = [f"{labels[name]} †" if name in partial else labels[name] for name in names]
    axes.set_yticks(range(len(names)), shown if show_names else [])
    axes.tick_params(axis="y", length=0)
    axes.spines["left"].set_visible(False)
    axes.grid(axis="y", color=FAINT, linewidth=0.6)
    axes.set_axisbelow(True)
    axes.set_xlabel(panel.title)


def draw_marker(axes: Axes, mark: FamilyMark, at: tuple[float, float], *, filled: bool) -> None:
    """Draw a family's marker, filled or open, over whatever lies beneath."""
    axes.plot(
        [at[0]],
        [at[1]],
        marker=mark.marker,
        markersize=5.5,
        color=mark.colour,
        markerfacecolor=mark.colour if filled else "white",
        clip_on=False,
        zorder=4,
    )


def _draw_finite(
    axes: Axes, entry: Entry, item: PooledScore, place: int, limits: tuple[float, float]
) -> None:
    mark = family_mark(entry.family)
    ends = [min(max(end, limits[0]), limits[1]) for end in (item.lowest, item.highest)]
    axes.plot(ends, [place, place], color=mark.colour, linewidth=1.1, solid_capstyle="butt")
    draw_marker(axes, mark, (item.value, place), filled=item.complete)


def _draw_off_scale(
    axes: Axes, entry: Entry, item: PooledScore, place: int, limits: tuple[float, float]
) -> None:
    above = item.value > limits[1]
    edge = limits[1] if above else limits[0]
    colour = family_mark(entry.family).colour
    axes.plot(
        [edge], [place], marker=">" if above else "<", color=colour, markersize=6.5, clip_on=False, zorder=4
    )
    text = format_cell(item.value, CellKind.SIGNIFICANT, 4)
    _note(axes, text, edge, place, left=above)


def _draw_infinite(axes: Axes, entry: Entry, item: PooledScore, place: int, x: float) -> None:
    draw_marker(axes, family_mark(entry.family), (x, place), filled=False)
    number = format_cell(item.n_impossible, CellKind.INTEGER, 0)
    _note(axes, f"∞  {number} impossible" if item.n_impossible else "∞", x, place, left=False)


def _note(axes: Axes, text: str, x: float, place: int, *, left: bool) -> None:
    """A small text beside a marker."""
    axes.annotate(
        text,
        (x, place),
        xytext=(-7 if left else 7, 0),
        textcoords="offset points",
        ha="right" if left else "left",
        va="center",
        fontsize=8,
    )
