"""Overdispersion of counts around a Poisson mean: two regression-based tests."""

from __future__ import annotations

import numpy as np

from steelyard.benchmark.specification.finding import (
    CLUSTERED,
    INDEPENDENT,
    Finding,
    clustered_variance,
    not_computed,
    ratio,
)
from steelyard.datasets import Floats
from steelyard.models.covariance import NodePairs

__all__ = ["overdispersion"]

FORMS = (("variance (1 + a) m", False), ("variance m + a m^2", True))


def overdispersion(counts: Floats, mean: Floats, pairs: NodePairs | None) -> tuple[Finding, ...]:
    """Test equal mean and variance against both of the usual alternatives.

    Regresses z = ((w - m)^2 - w) / m on a constant (variance (1 + a) m) and on m without a constant (variance
    m + a m^2) by least squares. The statistic is a over its error, one-sided against N(0, 1).

    Parameters
    ----------
    counts, mean : (n,) observed counts and fitted means; observations with mean 0 are left out and counted
    pairs : nodes of each observation, for node-clustered errors; None leaves those rows out

    Returns
    -------
    For each alternative a row with the ordinary least-squares error (n - 1 in its residual variance) and one
    with the node-clustered error.

    References
    ----------
    .. [1] Cameron & Trivedi (1990), Journal of Econometrics 46.
    """
    counts, mean = np.asarray(counts, dtype=float), np.asarray(mean, dtype=float)
    used = (mean > 0) & np.isfinite(mean)
    w, m = counts[used], mean[used]
    some = None if pairs is None else NodePairs(pairs.origin[used], pairs.destination[used], pairs.n_nodes)
    left_out = int((~used).sum())
    said = f"; {left_out} dyads without a finite positive mean left out" if left_out else ""
    if len(w) < 2:
        return tuple(
            not_computed(f"{form}; {kind}", "fewer than two dyads have a finite positive mean")
            for form, _ in FORMS
            for kind in _kinds(pairs)
        )
    # z from relative errors: the squares of large counts never meet. w / m = 1 + (w - m) / m.
    relative = (w - m) / m
    z = relative * (w - m) - 1.0 - relative
    found: list[Finding] = []
    for form, grows in FORMS:
        found += _regression(z, m if grows else np.ones(len(m)), some, form, said)
    return tuple(found)


def _kinds(pairs: NodePairs | None) -> tuple[str, ...]:
    return (INDEPENDENT,) if pairs is None else (INDEPENDENT, CLUSTERED)


def _regression(z: Floats, x: Floats, pairs: NodePairs | None, form: str, said: str) -> list[Finding]:
    """The slope of z on one column, with both kinds of error; x is scaled so that its square cannot overflow."""
    scale = float(x.max())
    x = x / scale
    norm = float(x @ x)
    slope = float(x @ z) / norm
    residual = z - slope * x
    unit = float(np.abs(z).max())
    ordinary = float(residual @ residual) / (len(z) - 1) / norm
    note = f"a = {slope / scale:.6g}; one-sided, standard normal{said}"
    about = f"{note}; least-squares t, dyads taken as independent"
    rows = [ratio(f"{form}; {INDEPENDENT}", slope, ordinary, about, one_sided=True, unit=unit)]
    if pairs is not None:
        clustered = clustered_variance(x * residual, pairs) / norm**2
        about = f"{note}; error allows dependence of dyads that share a node"
        rows.append(ratio(f"{form}; {CLUSTERED}", slope, clustered, about, one_sided=True, unit=unit))
    return rows
