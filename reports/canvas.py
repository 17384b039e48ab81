"""Blank figures and their bytes: SVG, PDF and PNG that depend on nothing but what was drawn."""

import io
import textwrap
import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from enum import Enum
from types import MappingProxyType
from typing import Any

import matplotlib
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine

from steelyard.reports.palette import INK, QUIET

__all__ = ["Drawing", "FigureFormat", "blank_figure", "drawing_style", "set_title"]

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
        stream = io.BytesIO()
        with drawing_style():
            self.figure.savefig(
                stream,
                format=file_format.value,
                metadata=dict(_METADATA[file_format]),
                facecolor="white" if file_format is FigureFormat.PNG else "none",
                transparent=file_format is not FigureFormat.PNG,
            )
        content = stream.getvalue()
        if file_format is FigureFormat.SVG:
            content = b"\n".join(line.rstrip() for line in content.splitlines()) + b"\n"
        return content


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


def set_title(figure: Figure, finding: str, subtitle: str) -> None:
    """The finding in bold at the top left, and below it what is shown on which footing."""
    title = textwrap.fill(finding, 76)
    lines = title.count("\n") + 1
    below = textwrap.fill(subtitle, 100)
    height = figure.get_figheight()
    top = 0.19 * lines + 0.16 * (below.count("\n") + 1) + 0.16
    figure.set_layout_engine(ConstrainedLayoutEngine(rect=(0, 0, 1, 1 - top / height)))
    figure.text(0.012, 1 - 0.06 / height, title, ha="left", va="top", fontsize=10.5, fontweight="bold")
    figure.text(0.012, 1 - (0.12 + 0.19 * lines) / height, below, ha="left", va="top", fontsize=8.5)
