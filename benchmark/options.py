"""What a model's options mean, read from where its author wrote it down: the docstring of its class."""

from __future__ import annotations

import inspect
import re
from dataclasses import MISSING, fields

from steelyard.models import ModelClass

__all__ = ["option_meanings"]

NOT_DESCRIBED = "not described by its author"
ENTRY = re.compile(r"(\w+(?:, \w+)*) : (.*)")


def option_meanings(model: ModelClass) -> tuple[tuple[str, str], ...]:
    """(name, meaning) of every option of a model, in the order of its fields.

    The meanings are those of the section "Parameters" of the class's docstring, in numpydoc's form; an option that
    it does not name is said not to be described.
    """
    described = _parameters(inspect.getdoc(model) or "")
    return tuple((f.name, described.get(f.name, NOT_DESCRIBED) + _usual(f.default)) for f in fields(model))


def _usual(default: object) -> str:
    """What an option is when a study does not give it."""
    if default is MISSING:
        return ""
    return "; by default none" if default == () else f"; by default {str(default).lower()}"


def _parameters(text: str) -> dict[str, str]:
    """Name -> meaning of a section "Parameters"; its entries are `a : text` or `a, b : text`, continued indented."""
    found: dict[str, str] = {}
    names: list[str] = []
    lines = text.partition("Parameters\n----------\n")[2].splitlines()
    for number, line in enumerate(lines):
        if number + 1 < len(lines) and lines[number + 1] and set(lines[number + 1]) == {"-"}:
            break  # the heading of the next section
        entry = ENTRY.fullmatch(line)
        if entry:
            names = entry[1].split(", ")
            found.update(dict.fromkeys(names, entry[2]))
        elif line.startswith(" ") and names:
            found.update({name: f"{found[name]} {line.strip()}" for name in names})
    return found
