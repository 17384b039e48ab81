"""Tables as HTML, and the template environment of the page."""

from pathlib import Path

import jinja2
from markupsafe import Markup

from steelyard.reports.tables import Table

__all__ = ["render_html", "template_environment"]


def template_environment() -> jinja2.Environment:
    """Templates with escaping always on and undefined names as errors."""
    return jinja2.Environment(
        loader=jinja2.FileSystemLoader(Path(__file__).with_name("templates")),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )


def render_html(table: Table) -> Markup:
    """Write a captioned HTML table in a scrolling region, sortable where the page's script runs."""
    template = template_environment().get_template("table.html")
    return Markup(template.render(table=table, grid=table.grid()))
