"""The dyads that a law of the weight given a link is fitted on."""

from __future__ import annotations

import numpy as np

from steelyard.datasets import Dyads
from steelyard.models.errors import ModelError

__all__ = ["observed_links"]


def observed_links(dyads: Dyads) -> Dyads:
    """The dyads that carry a flow.

    Raises
    ------
    ModelError : none does
    """
    links = dyads.links
    if not links.any():
        raise ModelError(
            f"none of the {len(dyads)} dyads carries a flow, so a law of weights cannot be fitted"
        )
    mask = np.zeros((dyads.n_nodes, dyads.n_nodes), dtype=bool)
    mask[dyads.origin[links], dyads.destination[links]] = True
    return dyads.select(mask)
