"""The public entry: tidy tables and facts in, a folder of reports out."""

import base64
import hashlib
import re
from collections.abc import Collection, Mapping
from pathlib import Path

import pandas as pd

from steelyard.reports.canvas import FigureFormat
from steelyard.reports.document import Document, build_document
from steelyard.reports.errors import ReportError
from steelyard.reports.facts import ReportFacts, ReportFormat
from steelyard.reports.figures import FIGURE_NAMES
from steelyard.reports.html import template_environment
from steelyard.reports.inline_svg import inline_svg
from steelyard.reports.markdown_report import render_markdown_report
from steelyard.reports.wording import tie_remark
from steelyard.reports.writing import csv_bytes, write_atomically

__all__ = ["render_page", "write_reports"]

_TABLE_NAME = re.compile(r"[a-z][a-z0-9_]*")
_FIGURE_FILE = re.compile(
    rf"({'|'.join(FIGURE_NAMES)})-[a-z0-9-]+\.({'|'.join(f.value for f in FigureFormat)})"
)
# Names that a run may give to its tidy tables; a CSV of another name is somebody's own.
_TABLE_FILE = re.compile(
    r"(candidates|criteria|estimates|scores|differences|confidence_set|links|statistics|agreement|tests"
    r"|outcomes)\.csv"
)


def write_reports(
    directory: Path,
    tables: Mapping[str, pd.DataFrame],
    facts: ReportFacts,
    formats: frozenset[ReportFormat],
) -> tuple[Path, ...]:
    """Write the reports of a run; equal tables and facts give equal bytes.

    Parameters
    ----------
    directory : folder to write into; made if missing. Figures and tidy tables that an earlier run left in
        figures/ and tables/ and that this one does not have are removed; all other files are left alone
    tables : tidy tables by name (candidates, criteria, estimates, scores, tests, outcomes are read; all become CSV)
    facts : title, data, methods, provenance, notes
    formats : HTML writes report.html, MARKDOWN report.md, either of them figures/*.svg, pdf and png;
        CSV writes tables/<name>.csv

    Returns
    -------
    tuple of the paths written, in the order of writing

    Raises
    ------
    ReportError : a table's name is no file name, or a table lacks a column or holds what it should not
    OSError : the folder cannot be written to
    """
    written = _write_tables(directory / "tables", tables) if ReportFormat.CSV in formats else []
    if ReportFormat.CSV in formats:
        _remove_stale(directory / "tables", _TABLE_FILE, written)
    if not formats & {ReportFormat.HTML, ReportFormat.MARKDOWN}:
        return tuple(written)
    document = build_document(tables, facts)
    for drawing in (drawing for section in document.sections for drawing in section.drawings):
        for kind in FigureFormat:
            path = directory / "figures" / f"{drawing.name}.{kind.value}"
            written.append(write_atomically(path, drawing.content(kind)))
    _remove_stale(directory / "figures", _FIGURE_FILE, written)
    if ReportFormat.MARKDOWN in formats:
        text = render_markdown_report(document)
        written.append(write_atomically(directory / "report.md", text.encode("utf-8")))
    if ReportFormat.HTML in formats:
        written.append(write_atomically(directory / "report.html", render_page(document).encode("utf-8")))
    return tuple(written)


def _remove_stale(folder: Path, ours: re.Pattern[str], written: Collection[Path]) -> None:
    """Remove files of a name that only an earlier report can have written, unless just written again."""
    kept = {path.name for path in written}
    for path in folder.iterdir() if folder.is_dir() else ():
        if ours.fullmatch(path.name) and path.name not in kept and path.is_file():
            path.unlink()


def _write_tables(directory: Path, tables: Mapping[str, pd.DataFrame]) -> list[Path]:
    for name in tables:
        if not _TABLE_NAME.fullmatch(name):
            raise ReportError(
                "table name", repr(name), "lower-case letters, digits and _", "rename the table"
            )
    return [write_atomically(directory / f"{name}.csv", csv_bytes(frame)) for name, frame in tables.items()]


def render_page(document: Document) -> str:
    """Write a report as one HTML file that asks for nothing else, under a policy that forbids it to."""
    environment = template_environment()
    script = environment.get_template("page.js").render().strip()
    digest = base64.b64encode(hashlib.sha256(script.encode("utf-8")).digest()).decode("ascii")
    page: str = environment.get_template("page.html").render(
        document=document,
        facts=document.facts,
        inline_svg=inline_svg,
        script=script,
        script_digest=digest,
        shown_places=6,
        tie_remark=tie_remark,
    )
    return page
