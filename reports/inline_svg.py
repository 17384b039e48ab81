"""A drawing as SVG inside the page: named, described, with its own ids and the page's colours."""

import re

from markupsafe import Markup, escape

from steelyard.reports.canvas import Drawing, FigureFormat
from steelyard.reports.palette import PAGE_COLOURS

__all__ = ["inline_svg"]

_SIZE = re.compile(r'viewBox="0 0 ([\d.]+) ([\d.]+)"')


def inline_svg(drawing: Drawing) -> Markup:
    """Turn a drawing into an `svg` element that can stand beside others in one page.

    Ids get the drawing's name as prefix, namespaces and metadata go (HTML needs neither), and every colour
    of the palette becomes a style variable with the printed colour as its fallback.
    """
    text = drawing.content(FigureFormat.SVG).decode("utf-8")
    size = _SIZE.search(text)
    width, height = size.groups() if size else ("468", "300")
    body = text[text.index(">", text.index("<svg ")) + 1 : text.rindex("</svg>")]
    body = re.sub(r"<metadata>.*?</metadata>", "", body, flags=re.DOTALL)
    body = re.sub(r'\bid="', f'id="{drawing.name}-', body)
    body = re.sub(r'\bxlink:href="#', f'href="#{drawing.name}-', body)
    body = body.replace("url(#", f"url(#{drawing.name}-")
    body = _page_colours(body)
    title = escape(drawing.finding)
    opening = (
        f'<svg viewBox="0 0 {width} {height}" width="{width}pt" height="{height}pt" role="img" '
        f'aria-labelledby="{drawing.name}-title"><title id="{drawing.name}-title">{title}</title>'
    )
    return Markup(opening + body.strip() + "</svg>")


def _page_colours(body: str) -> str:
    """Swap colours inside style attributes only, so that a label that reads like a colour is left alone."""

    def swap(match: re.Match[str]) -> str:
        style = match.group(0)
        for colour, variable in PAGE_COLOURS.items():
            style = re.sub(f"(: ?){colour}\\b", rf"\1var({variable}, {colour})", style)
        return re.sub(r"(stroke|fill): white\b", r"\1: var(--paper, white)", style)

    return re.sub(r'style="[^"]*"', swap, body)
