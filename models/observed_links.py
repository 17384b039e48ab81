"""The dyads that a law of the weight given a link is fitted on, and what such a law cannot be fitted to."""

from __future__ import annotations

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.errors import ModelError
from steelyard.models.likelihoods import least_squares

__all__ = ["observed_links", "refuse_exact_flows"]


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


def refuse_exact_flows(amounts: Floats, design: Floats, law: str, scale: str) -> None:
    """Refuse flows that leave a law of amounts no spread.

    Parameters
    ----------
    amounts : (n,) positive flows
    design : (n, k) columns of the log mean
    law, scale : what the law and its scale are called in the sentence

    Raises
    ------
    ModelError : the covariates explain the log of every flow
    """
    logs = np.log(amounts)
    residual = logs - design @ least_squares(design, logs)
    if float(np.abs(residual).max()) <= 1e-9 * max(1.0, float(np.abs(logs).max())):
        raise ModelError(
            f"the covariates explain all {len(logs)} positive flows exactly, so {scale} is 0 and {law} has no "
            "density; use fewer covariates"
        )
