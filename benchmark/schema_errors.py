"""Schema violations as sentences: which key, what was expected, what was got, what to do."""

from __future__ import annotations

from typing import Any

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from steelyard.benchmark import study_file
from steelyard.datasets.errors import suggestion

__all__ = ["schema_problems"]

# Where a key may stand -> the table that says which keys are known there.
TABLES: dict[str, type[BaseModel]] = {
    "": study_file.StudyTable,
    "data": study_file.DataTable,
    "columns": study_file.ColumnsTable,
    "covariates": study_file.CovariateTable,
    "validation": study_file.ValidationTable,
    "report": study_file.ReportTable,
}


def schema_problems(error: ValidationError, name: str) -> list[str]:
    """One sentence for each violation, in the order of the file."""
    return [f"{name}, {_place(detail['loc'])}: {_sentence(detail)}" for detail in error.errors()]


def _place(location: tuple[int | str, ...]) -> str:
    """'candidates 2, label' for ('candidates', 1, 'label'): entries of a list are counted from 1."""
    words: list[str] = []
    for step in location:
        if isinstance(step, int) and words:
            words[-1] += f" {step + 1}"
        elif not (isinstance(step, str) and ("[" in step or step in ("str", "int", "dict"))):
            words.append(str(step))
    return ", ".join(words)


def _sentence(detail: ErrorDetails) -> str:
    kind, context = detail["type"], detail.get("ctx", {})
    if kind == "extra_forbidden":
        return _unknown_key(detail["loc"])
    if kind == "missing":
        return "this key is required; add it"
    if kind == "literal_error":
        return f"must be {context['expected']}; got {detail['input']!r}"
    return f"{_lowered(detail['msg'])}; got {_shown(detail['input'])}"


def _unknown_key(location: tuple[int | str, ...]) -> str:
    key = str(location[-1])
    if len(location) == 1 and key == "statistics":
        return "network statistics are not available in this version; remove the section"
    parents = [str(s) for s in location[:-1] if not isinstance(s, int)]
    table = TABLES.get(next((p for p in reversed(parents) if p in TABLES), ""), study_file.StudyTable)
    known = list(table.model_fields)
    if table is study_file.StudyTable and len(location) > 1:
        return f"there is no key '{key}' here"
    return f"there is no key '{key}'; {suggestion(key, known)}"


def _lowered(message: str) -> str:
    """Pydantic starts with 'Input should'; the place is already named, so 'should' is enough."""
    return (
        message.removeprefix("Input ") if message.startswith("Input ") else message[0].lower() + message[1:]
    )


def _shown(value: Any) -> str:
    text = repr(value)
    return text if len(text) <= 60 else text[:57] + "..."
