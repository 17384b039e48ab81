"""Probabilities of narrow intervals, where a difference of two distribution functions has no digits left."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from steelyard.datasets.arrays import Floats

__all__ = ["log_narrow_integral"]

_NODES = 8


def log_narrow_integral(log_density: Callable[[Floats], Floats], lower: Floats, width: Floats, /) -> Floats:
    """Log of the integral of exp(log_density) from `lower` to `lower + width`, by eight-point Gauss-Legendre.

    Meant for intervals over which the log density changes by at most about one; the error is then 1e-14.

    Parameters
    ----------
    log_density : smooth on the interval; maps (n,) points to (n,) values
    lower : (n,) array
    width : (n,) array > 0, given apart because `upper - lower` may have lost its digits

    Returns
    -------
    (n,) array.
    """
    nodes, shares = np.polynomial.legendre.leggauss(_NODES)
    centre = log_density(lower + 0.5 * width)
    total = np.zeros_like(width)
    for node, share in zip(nodes, shares, strict=True):
        total += 0.5 * share * np.exp(log_density(lower + 0.5 * (1.0 + node) * width) - centre)
    return centre + np.log(total) + np.log(width)
