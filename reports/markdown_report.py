"""The report as one Markdown file, figures beside it."""

from steelyard.reports.document import ComparisonSection, Document
from steelyard.reports.facts import MethodSheet
from steelyard.reports.markdown import escape_markdown, escape_paragraph, render_markdown

__all__ = ["render_markdown_report"]


def render_markdown_report(document: Document) -> str:
    """Write the report in Markdown; figures are linked as figures/<name>.svg."""
    facts = document.facts
    blocks = [f"# {escape_markdown(facts.title)}", *map(escape_paragraph, document.compared)]
    blocks += _pairs(facts.data)
    blocks.append("## Verdict")
    blocks += _answers(document)
    blocks.append("## Cautions")
    blocks.append(
        render_markdown(document.warnings) if document.warnings.rows else "Every fit is certified and scored."
    )
    blocks.append(document.outcome)
    blocks += _bullets(document.cautions)
    for section in document.sections:
        blocks += _section(section)
    blocks += ["## Candidates", render_markdown(document.candidates)]
    blocks += _estimates(document)
    if document.tests:
        blocks += ["## Specification tests", *map(render_markdown, document.tests)]
    blocks += _methods(facts.methods)
    if facts.provenance:
        blocks += ["## Provenance", *_pairs(facts.provenance)]
    if facts.notes:
        blocks += ["## Notes", *map(escape_paragraph, facts.notes)]
    return "\n\n".join(block.rstrip("\n") for block in blocks if block) + "\n"


def _heading(section: ComparisonSection) -> str:
    return f"{section.title}; {section.held_out}" if section.held_out else section.title


def _bullets(items: tuple[str, ...]) -> list[str]:
    return ["\n".join(f"- {escape_paragraph(item)}" for item in items)] if items else []


def _pairs(pairs: tuple[tuple[str, str], ...]) -> list[str]:
    return _bullets(tuple(f"{label}: {value}" for label, value in pairs))


def _section(section: ComparisonSection) -> list[str]:
    sheet = section.comparison.sheet
    under = [text for text in (sheet.purpose, sheet.text if sheet.text != sheet.title else "") if text]
    blocks = [f"## {escape_markdown(_heading(section))}", *map(escape_paragraph, under)]
    blocks += [*map(escape_paragraph, section.verdict), render_markdown(section.ranking)]
    for drawing in section.drawings:
        blocks += [
            f"![{escape_markdown(drawing.finding)}](figures/{drawing.name}.svg)",
            escape_paragraph(drawing.reading),
        ]
    blocks += [render_markdown(table) for table in (section.scores, section.criteria) if table]
    return blocks


def _answers(document: Document) -> list[str]:
    """One line a footing, who leads on either side and whether they agree."""
    lines = []
    for _, answer in document.answers:
        sides = [
            f"{where} ({lead.by}) {lead.text}"
            for where, lead in (("in sample", answer.in_sample), ("out of sample", answer.out_of_sample))
            if lead
        ]
        where = f", {answer.held_out}" if answer.held_out else ""
        text = f"{answer.title}{where}: {'; '.join([*sides, answer.agreement])}."
        lines.append(" ".join([text, *answer.remarks]))
    alone = [escape_paragraph(document.alone)] if document.alone else []
    return [*_bullets(tuple(lines)), *alone] or ["There is nothing to rank."]


def _estimates(document: Document) -> list[str]:
    blocks = ["## Estimates"] if document.estimates else []
    blocks += [render_markdown(table) for table in document.side_by_side]
    for item in document.estimates:
        blocks.append(f"### {escape_markdown(item.candidate)}")
        if item.coefficients:
            blocks.append(render_markdown(item.coefficients))
        if item.node_sentence:
            blocks.append(f"{escape_paragraph(item.node_sentence)}: see tables/estimates.csv.")
    return blocks


def _methods(methods: tuple[MethodSheet, ...]) -> list[str]:
    blocks = ["## Methods"] if methods else []
    for sheet in methods:
        blocks.append(f"### {escape_markdown(f'{sheet.name} ({sheet.family})')}")
        blocks.append(escape_paragraph(sheet.summary))
        blocks += _pairs(
            (
                ("Formula", sheet.formula),
                ("Parameters", sheet.parameters),
                ("Sources", sheet.sources),
                ("Caution", sheet.caution),
            )
        )
    return blocks
