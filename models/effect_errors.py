"""Standard errors of node effects, in their gauge."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from steelyard.datasets.arrays import Floats
from steelyard.models.effect_design import EffectDesign
from steelyard.models.estimates import ErrorKind

__all__ = ["MOST_EFFECTS", "effect_errors"]

# Beyond, the dense inverse would cost more than the fit.
MOST_EFFECTS = 4_000


def effect_errors(
    design: EffectDesign, information: Floats, meat: Callable[[], Floats]
) -> Mapping[ErrorKind, Floats]:
    """Model and robust standard errors of the P effects; none where P is above MOST_EFFECTS.

    Parameters
    ----------
    information : (P + r, P + r) of effects and scaled slopes, with curvature along the gauge
    meat : makes the (P + r, P + r) sum over dyads of score x score', small-sample factor included

    Node-clustered errors are left out: a node's own score total is its strength constraint, zero by construction,
    so that variance would be about nothing.
    """
    size = design.incidence.size
    if size > MOST_EFFECTS:
        return {}
    inverse: Floats = np.linalg.inv(information).astype(np.float64, copy=False)
    # Effects beside the original columns, then their gauge: what it takes off along the gauge directions is
    # also what the added curvature put in.
    slopes_taken = design.taken @ design.back
    rows = design.incidence.in_gauge(inverse[:size] - slopes_taken @ inverse[size:])
    return {
        kind: np.sqrt(np.maximum(np.einsum("ij,ij->i", rows @ matrix, rows), 0.0))
        for kind, matrix in ((ErrorKind.MODEL, information), (ErrorKind.ROBUST, meat()))
    }
