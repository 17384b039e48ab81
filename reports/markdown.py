"""Tables as Markdown pipe tables, with every label inert."""

import re

from steelyard.reports.tables import Alignment, Table

__all__ = ["escape_markdown", "escape_paragraph", "render_markdown"]

_RULES = {Alignment.LEFT: ":---", Alignment.RIGHT: "---:"}
_ACTIVE = re.compile(r"([\\`*_\[\]|~$])")


def escape_markdown(text: str) -> str:
    """Make a text read as itself in Markdown: no markup, no HTML, no cell or line breaks."""
    flat = " ".join(text.split())
    flat = flat.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")
    return _ACTIVE.sub(r"\\\1", flat)


def escape_paragraph(text: str) -> str:
    """`escape_markdown` for a text that starts a line, where # + - = and numbers would open a block."""
    escaped = escape_markdown(text)
    if re.match(r"\d+[.)]\s", escaped):
        return re.sub(r"^(\d+)([.)])", r"\1\\\2", escaped)
    return re.sub(r"^([#+\-=])", r"\\\1", escaped)


def render_markdown(table: Table) -> str:
    """Write a table as a pipe table under its caption, notes below; ends with a line end."""
    grid = table.grid()
    lines = [
        f"**{escape_markdown(table.caption)}**",
        "",
        _line(tuple(map(escape_markdown, grid.titles))),
        _line(tuple(_RULES[alignment] for alignment in grid.alignments)),
        *(_line(tuple(map(escape_markdown, row))) for row in grid.texts),
    ]
    for note in table.notes:
        lines += ["", escape_paragraph(note)]
    return "\n".join(lines) + "\n"


def _line(cells: tuple[str, ...]) -> str:
    return "| " + " | ".join(cells) + " |"
