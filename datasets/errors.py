"""Everything that can go wrong, as one tree; the packages above hang their own branches on it.

SteelyardError              the root: catch this to catch all of ours
├── DataError               a file, a column or a value in the user's data
│   └── CovariateError      a covariate that cannot be computed from the data
├── UnknownNameError        a name that nobody registered; carries the nearest ones
├── RegistrationError       a plugin that breaks the rules, or whose name is taken
├── ModelError              a fit that cannot be made (steelyard.models.errors)
└── StudyError              a study file or a run that cannot be used (steelyard.benchmark.errors)
"""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterable

__all__ = [
    "CovariateError",
    "DataError",
    "RegistrationError",
    "SteelyardError",
    "UnknownNameError",
    "nearest_names",
    "suggestion",
]


class SteelyardError(Exception):
    """Root of the tree. Its text says what, where, what was expected and what to do, a sentence a problem."""


class DataError(SteelyardError):
    """The user's data break a rule.

    Attributes
    ----------
    problems : one sentence for each thing that is wrong; all of them, not only the first
    """

    def __init__(self, *problems: str) -> None:
        self.problems = problems
        super().__init__("\n".join(problems))

    def __reduce__(self) -> tuple[type[DataError], tuple[str, ...]]:
        # Exceptions come back from worker processes, and must come back whole.
        return type(self), self.problems


class CovariateError(DataError):
    """A covariate cannot be computed from the columns that the data hold."""


class RegistrationError(SteelyardError):
    """A plugin that breaks the rules of its registry, or whose name is taken."""


class UnknownNameError(SteelyardError):
    """A name that nobody registered.

    Attributes
    ----------
    kind : what sort of thing was looked for ("model", "data set", "score", ...)
    name : the name that was asked for
    nearest : the most similar known names, best first, at most three
    """

    def __init__(self, kind: str, name: str, known: Iterable[str], *, where: str = "") -> None:
        self.kind = kind
        self.name = name
        known = sorted(known)
        self._rebuilt_from = (kind, name, known, where)
        self.nearest = nearest_names(name, known)
        place = f" ({where})" if where else ""
        super().__init__(f"there is no {kind} named '{name}'{place}; {suggestion(name, known)}")

    def __reduce__(self) -> tuple[Callable[..., UnknownNameError], tuple[object, ...]]:
        return _unknown_name, self._rebuilt_from


def _unknown_name(kind: str, name: str, known: Iterable[str], where: str) -> UnknownNameError:
    """Unpickling cannot pass keywords."""
    return UnknownNameError(kind, name, known, where=where)


def nearest_names(name: str, known: Iterable[str], *, most: int = 3) -> tuple[str, ...]:
    """The known names most like `name`, best first; empty when nothing is close."""
    return tuple(difflib.get_close_matches(name, sorted(known), n=most, cutoff=0.5))


def suggestion(name: str, known: Iterable[str]) -> str:
    """What to do about an unknown name: the nearest ones, or all of them when none is near."""
    known = sorted(known)
    nearest = nearest_names(name, known)
    if nearest:
        return "did you mean " + " or ".join(f"'{n}'" for n in nearest) + "?"
    return "known are: " + (", ".join(known) if known else "none")
