"""A lighter copy of the figures' font, because embedding it is most of the time that a PDF takes."""

import io
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

# Comes with matplotlib, which subsets fonts with it; it states no types.
from fontTools.ttLib import TTFont  # type: ignore[import-untyped]
from matplotlib import font_manager
from matplotlib.figure import Figure
from matplotlib.text import Text

__all__ = ["light_font"]

# The font that comes with matplotlib, so that figures are the same on every machine.
FAMILY = "DejaVu Sans"
# Ligatures, positioning and kerning: figures need none of them, and subsetting a font must walk through all.
_LAYOUT_TABLES = ("GSUB", "GPOS", "GDEF", "kern", "MATH")


@contextmanager
def light_font(figure: Figure) -> Iterator[None]:
    """Set all texts of a figure in the same glyphs without layout tables; undone afterwards."""
    texts = [text for text in figure.findobj(Text) if isinstance(text, Text)]
    with tempfile.TemporaryDirectory(ignore_cleanup_errors=True) as folder:
        path = Path(folder) / "font.ttf"
        path.write_bytes(_light_copy())
        for text in texts:
            text.get_fontproperties().set_file(path)
        try:
            yield
        finally:
            for text in texts:
                text.get_fontproperties().set_file(None)


def _light_copy() -> bytes:
    content = io.BytesIO()
    with TTFont(str(font_manager.findfont(FAMILY)), lazy=True, recalcTimestamp=False) as font:
        for table in _LAYOUT_TABLES:
            if table in font:
                del font[table]
        font.save(content)
    return content.getvalue()
