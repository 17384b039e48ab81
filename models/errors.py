"""Why a model could not be fitted. Part of the tree drawn in steelyard.datasets.errors."""

from __future__ import annotations

from steelyard.datasets.errors import SteelyardError

__all__ = ["ModelError"]


class ModelError(SteelyardError):
    """These dyads do not allow this model to be fitted: which rule is broken and what to do is in the text.

    The harness turns it into a failed outcome; it never stops a run.
    """
