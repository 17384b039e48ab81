"""Reports: tidy tables in, one table type, and from it pages, Markdown, CSV and figures."""

from steelyard.reports.document import Document, build_document
from steelyard.reports.errors import ReportError
from steelyard.reports.facts import FootingSheet, MethodSheet, ReportFacts, ReportFormat
from steelyard.reports.html import render_html
from steelyard.reports.markdown import render_markdown
from steelyard.reports.page import write_reports
from steelyard.reports.tables import Alignment, Cell, CellKind, Column, Estimate, Grid, Missing, Table
from steelyard.reports.terminal import terminal_summary
from steelyard.reports.text import render_text

__all__ = [
    "Alignment",
    "Cell",
    "CellKind",
    "Column",
    "Document",
    "Estimate",
    "FootingSheet",
    "Grid",
    "MethodSheet",
    "Missing",
    "ReportError",
    "ReportFacts",
    "ReportFormat",
    "Table",
    "build_document",
    "render_html",
    "render_markdown",
    "render_text",
    "terminal_summary",
    "write_reports",
]
