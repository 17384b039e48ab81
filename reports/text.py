"""Tables as aligned plain text, for terminals and logs."""

import unicodedata

from steelyard.reports.tables import Alignment, Table

__all__ = ["render_text"]

_GAP = "  "


def render_text(table: Table) -> str:
    """Write a table as aligned plain text: caption, heading, rule, rows, notes; ends with a line end."""
    grid = table.grid()
    lines = [grid.titles, *(tuple(" ".join(text.split()) for text in row) for row in grid.texts)]
    widths = [max(_width(line[index]) for line in lines) for index in range(len(grid.titles))]
    padded = [_GAP.join(map(_pad, line, widths, grid.alignments)).rstrip() for line in lines]
    rule = _GAP.join("-" * width for width in widths)
    return "\n".join([table.caption, "", padded[0], rule, *padded[1:], *table.notes]) + "\n"


def _width(text: str) -> int:
    """Columns a terminal needs: none for combining marks, two for wide characters."""
    return sum(
        0 if unicodedata.combining(sign) else 2 if unicodedata.east_asian_width(sign) in "WF" else 1
        for sign in text
    )


def _pad(text: str, width: int, alignment: Alignment) -> str:
    space = " " * (width - _width(text))
    return space + text if alignment is Alignment.RIGHT else text + space
