"""What can be wrong with a study or a run. Part of the tree drawn in steelyard.datasets.errors.

StudyError          a study file, or a directory to run it in, that cannot be used
└── FootingError    a comparison of log-likelihoods that are not on one footing
"""

from __future__ import annotations

from steelyard.datasets import SteelyardError

__all__ = ["FootingError", "StudyError"]


class StudyError(SteelyardError):
    """A study file, or a directory to run it in, that cannot be used.

    Attributes
    ----------
    problems : one sentence for each thing that is wrong
    """

    def __init__(self, *problems: str) -> None:
        self.problems = problems
        super().__init__("\n".join(problems))


class FootingError(StudyError):
    """Log-likelihoods that are not on one footing were asked to share a ranking."""
