"""Blank figures and their bytes: SVG, PDF and PNG that depend on nothing but what was drawn."""

import io
import textwrap
import warnings
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager, nullcontext
from dataclasses import dataclass
from enum import Enum
from functools import cached_property
from types import MappingProxyType
from typing import Any

import matplotlib
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from steelyard.reports.fonts import light_font
from steelyard.reports.palette import INK, QUIET

__all__ = ["Drawing", "FigureFormat", "arrange", "blank_figure", "drawing_style", "set_title"]

WIDTH = 6.5
# Mapping[Any, Any]: matplotlib types its settings by a literal of every name.
_STYLE: Mapping[Any, Any] = MappingProxyType(
    {
        "axes.edgecolor": QUIET,
        "axes.labelcolor": INK,
        "axes.labelsize": 9.0,
        "axes.linewidth": 0.6,
        "axes.spines.right": False,
        "axes.spines.top": False,
        "axes.unicode_minus": True,
        "font.family": ["sans-serif"],
        "font.size": 9.0,
        "figure.dpi": 100.0,
        "pdf.fonttype": 42,
        "savefig.dpi": 200.0,
        "savefig.transparent": True,
        "svg.fonttype": "none",
        "svg.hashsalt": "steelyard",
        "text.color": INK,
        # Labels are a user's words: a dollar sign in one is a dollar sign.
        "text.parse_math": False,
        "xtick.color": QUIET,
        "xtick.labelcolor": INK,
        "ytick.color": QUIET,
        "ytick.labelcolor": INK,
    }
)


class FigureFormat(Enum):
    """File formats of figures; the value is the file's ending."""

    SVG = "svg"
    PDF = "pdf"
    PNG = "png"


_METADATA: Mapping[FigureFormat, Mapping[str, None]] = MappingProxyType(
    {
        FigureFormat.SVG: MappingProxyType({"Date": None, "Creator": None}),
        FigureFormat.PDF: MappingProxyType({"CreationDate": None, "Creator": None, "Producer": None}),
        FigureFormat.PNG: MappingProxyType({"Software": None}),
    }
)


@dataclass(frozen=True)
class Drawing:
    """A finished figure: its file name, its finding (the title), and how to read it."""

    name: str
    finding: str
    reading: str
    figure: Figure

    def content(self, file_format: FigureFormat) -> bytes:
        """Bytes of the figure; equal drawings give equal bytes."""
        return self._svg if file_format is FigureFormat.SVG else self._printed(file_format)

    @cached_property
    def _svg(self) -> bytes:
        """Drawn once: the file and the page hold the same."""
        content = self._printed(FigureFormat.SVG)
        return b"\n".join(line.rstrip() for line in content.splitlines()) + b"\n"

    def _printed(self, file_format: FigureFormat) -> bytes:
        stream = io.BytesIO()
        font = light_font(self.figure) if file_format is FigureFormat.PDF else nullcontext()
        with drawing_style(), font:
            self.figure.savefig(
                stream,
                format=file_format.value,
                metadata=dict(_METADATA[file_format]),
                facecolor="white" if file_format is FigureFormat.PNG else "none",
                transparent=file_format is not FigureFormat.PNG,
            )
        return stream.getvalue()


@contextmanager
def drawing_style() -> Iterator[None]:
    """Matplotlib under our settings only, whatever the user's own are; restored afterwards."""
    with matplotlib.rc_context(), warnings.catch_warnings():
        # A script the font lacks shows as boxes in PDF and PNG; SVG keeps the text itself.
        warnings.filterwarnings("ignore", message="Glyph .* missing from", category=UserWarning)
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(_STYLE)
        yield


def blank_figure(height: float) -> Figure:
    """A figure as wide as a text column (6.5 inches), `height` inches high; call within `drawing_style`."""
    figure = Figure(figsize=(WIDTH, height))
    FigureCanvasAgg(figure)
    return figure


def set_title(figure: Figure, finding: str, subtitle: str) -> float:
    """The finding at the top left, and below it what is shown on which footing; returns its height in inches.

    No bold face: every further face costs a PDF one more embedded font, which is most of its time.
    """
    title = textwrap.fill(finding, 74)
    lines = title.count("\n") + 1
    below = textwrap.fill(subtitle, 100)
    height = figure.get_figheight()
    figure.text(0.012, 1 - 0.06 / height, title, ha="left", va="top", fontsize=11)
    figure.text(
        0.012, 1 - (0.13 + 0.19 * lines) / height, below, ha="left", va="top", fontsize=8.5, color=INK
    )
    return 0.19 * lines + 0.16 * (below.count("\n") + 1) + 0.22


def arrange(figure: Figure, panels: Sequence[Sequence[Axes]], *, top: float, bottom: float) -> None:
    """Place panels beside each other, each as wide as the labels around them leave room for.

    Matplotlib's own layout engines would measure everything again for each file; this measures twice, since a
    note inside the axes may stand out of them once they have shrunk.

    Parameters
    ----------
    figure : the figure; call when all is drawn
    panels : left to right; axes that lie on each other (twins) form one panel
    top, bottom : inches kept for title and legend
    """
    for _ in range(2):
        _place(figure, panels, top=top, bottom=bottom)


def _place(figure: Figure, panels: Sequence[Sequence[Axes]], *, top: float, bottom: float) -> None:
    width, height = figure.get_size_inches()
    margins = [[_overhang(axes, figure.dpi) for axes in panel] for panel in panels]
    left, low, right, high = (
        [max(sides[side] for sides in panel) + 0.06 for panel in margins] for side in range(4)
    )
    each = (width - sum(left) - sum(right)) / len(panels)
    span = height - top - bottom - max(low) - max(high)
    start = 0.0
    for panel, before, after in zip(panels, left, right, strict=True):
        place = ((start + before) / width, (bottom + max(low)) / height, each / width, span / height)
        for axes in panel:
            axes.set_position(place)
        start += before + each + after


def _overhang(axes: Axes, dpi: float) -> tuple[float, float, float, float]:
    """Inches by which labels stand out of an axes: left, bottom, right, top."""
    inner = axes.get_window_extent()
    outer = axes.get_tightbbox() or inner
    sides = (inner.x0 - outer.x0, inner.y0 - outer.y0, outer.x1 - inner.x1, outer.y1 - inner.y1)
    return (sides[0] / dpi, sides[1] / dpi, sides[2] / dpi, sides[3] / dpi)
