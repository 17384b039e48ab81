"""What every law says about n dyads, and the checks that its parameters pass."""

from __future__ import annotations

from typing import Protocol, runtime_checkable

import numpy as np

from steelyard.datasets.arrays import Floats
from steelyard.models.errors import ModelError
from steelyard.models.measure import Measure

__all__ = [
    "AmountsDistribution",
    "FlowDistribution",
    "as_amounts",
    "checked_levels",
    "checked_parameter",
]


@runtime_checkable
class FlowDistribution(Protocol):
    """Distributions of the weights of n dyads, one for each: all that scores need, nothing of the model.

    Weights are in the study's unit. Arguments called `weights` have shape (n,), or (..., n) for many weights
    of each dyad; results have the same shape.
    """

    @property
    def measure(self) -> Measure:
        """What the distributions put probability on."""

    @property
    def link_probability(self) -> Floats:
        """(n,) probability of a weight above zero."""

    @property
    def mean(self) -> Floats:
        """(n,) expected weight, zeros included; may be infinite, never nan."""

    @property
    def variance(self) -> Floats:
        """(n,) variance of the weight, zeros included; may be infinite, never nan."""

    def log_density(self, weights: Floats, /) -> Floats:
        """Log probability of the weights; for amounts above zero the log density in w (Jacobian included).

        Impossible weights (negative, nan, fractions under a law of counts) get minus infinity; never nan.
        """

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`, the atom at zero included."""

    def quantile(self, level: float | Floats, /) -> Floats:
        """(n,) smallest float w >= 0 with cdf(w) >= level; one level for each dyad or for all."""

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) independent draws."""


@runtime_checkable
class AmountsDistribution(FlowDistribution, Protocol):
    """A distribution of amounts; every law whose measure is AMOUNTS offers it, so that it has cells."""

    def log_interval(self, lower: Floats, upper: Floats, /) -> Floats:
        """Log of P(lower < w <= upper) for 0 <= lower < upper, exact in both tails and on narrow intervals.

        Parameters
        ----------
        lower, upper : (n,) arrays in the study's unit; `upper` may be infinite

        Returns
        -------
        (n,) array, minus infinity where the interval has no probability, never nan.
        """


def as_amounts(law: FlowDistribution, /) -> AmountsDistribution:
    """Narrow a law to one of amounts.

    Raises
    ------
    ModelError
        if the measure is another one, or the law states no interval probabilities.
    """
    if law.measure is Measure.AMOUNTS and isinstance(law, AmountsDistribution):
        return law
    raise ModelError(
        f"Only a law of amounts with a `log_interval` method has interval probabilities; "
        f"got {type(law).__name__} of {law.measure.value}: add that method or score it on its own measure."
    )


def checked_parameter(
    name: str,
    values: float | Floats,
    n: int | None = None,
    *,
    at_least: float = -np.inf,
    at_most: float = np.inf,
    above: float = -np.inf,
) -> Floats:
    """Parameter of a law as an (n,) array of finite numbers within its bounds.

    Parameters
    ----------
    name : what the parameter is called in an error
    values : (n,) array, or one number where `n` says for how many dyads
    n : number of dyads; None takes it from `values`
    at_least, at_most, above : bounds, inclusive and (for `above`) exclusive

    Raises
    ------
    ModelError
        if a number is not finite or out of bounds, or the shape is not (n,).
    """
    array = np.asarray(values, dtype=np.float64)
    if n is not None and array.ndim == 0:
        array = np.full(n, array)
    if array.ndim != 1 or (n is not None and len(array) != n):
        wanted = "(n,)" if n is None else f"({n},)"
        raise ModelError(
            f"{name} must hold one number for each dyad: got shape {array.shape}, expected {wanted}."
        )
    bad = ~(np.isfinite(array) & (array >= at_least) & (array <= at_most) & (array > above))
    if bad.any():
        bounds = f"finite, >= {at_least:g}" if above == -np.inf else f"finite, > {above:g}"
        bounds += f", <= {at_most:g}" if at_most < np.inf else ""
        where = int(np.flatnonzero(bad)[0])
        raise ModelError(
            f"{name} must be {bounds}; got {array[where]!r} at dyad {where} ({bad.sum()} of {len(array)} "
            f"break the rule): look for covariates far outside the range of the fit."
        )
    return array


def checked_levels(level: float | Floats, n: int, /) -> Floats:
    """(n,) probability levels.

    Raises
    ------
    ModelError
        if a level is outside [0, 1] or nan, or the shape is not (n,).
    """
    return checked_parameter("Probability level", level, n, at_least=0.0, at_most=1.0)
