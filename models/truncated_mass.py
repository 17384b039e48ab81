"""Log masses of counts that exclude zero: truncated Poisson and negative binomial, and the logarithmic series."""

from __future__ import annotations

import numpy as np

from steelyard.datasets.arrays import Floats
from steelyard.models.special import (
    negative_binomial_log_mass,
    negative_binomial_log_zero,
    poisson_log_mass,
    whole_and_possible,
)

__all__ = ["log_series_log_mass", "log_series_mean_excess", "truncated_log_mass"]

_SERIES_INDEX = -4.6  # below, z / log(1 + z) - 1 is summed as a series in z
_SMALL_INDEX = -37.0  # below, log(1 + exp(index)) is exp(index) to all digits


def truncated_log_mass(weights: Floats, mean: Floats, size: Floats, /) -> Floats:
    """Log probability of whole weights under zero-truncated negative binomial laws.

    Parameters
    ----------
    weights : (n,) array; anything but whole numbers >= 1 gets minus infinity
    mean : (n,) array, finite, >= 0: that of the untruncated law; at 0 all mass is on 1
    size : (n,) array, > 0 where the mean is; infinity gives the zero-truncated Poisson law

    Returns
    -------
    (n,) array, never nan.
    """
    w, penalty = whole_and_possible(weights)
    some = np.where(mean > 0.0, mean, 1.0)
    log_link = np.log(-np.expm1(negative_binomial_log_zero(some, np.where(mean > 0.0, size, 1.0))))
    # Two logarithms of a tiny mean may add up to a hair above zero.
    log_mass = np.minimum(_log_mass(w, some, size) - log_link, 0.0)
    log_mass = np.where(mean > 0.0, log_mass, np.where(w == 1.0, 0.0, -np.inf))
    return np.where(w >= 1.0, log_mass, -np.inf) + penalty


def _log_mass(weights: Floats, mean: Floats, size: Floats) -> Floats:
    """Untruncated log mass; the Poisson form of it holds at means that underflow beside an infinite size."""
    weights, mean, size = np.broadcast_arrays(weights, mean, size)
    poisson = size == np.inf
    log_mass = np.empty(weights.shape)
    log_mass[poisson] = poisson_log_mass(weights[poisson], mean[poisson])
    rest = ~poisson
    log_mass[rest] = negative_binomial_log_mass(weights[rest], mean[rest], size[rest])
    return log_mass


def _log_log_one_plus(index: Floats, /) -> Floats:
    """log log(1 + exp(index)), also where exp(index) underflows or overflows."""
    small = index < _SMALL_INDEX
    safe = np.where(small, 0.0, index)
    return np.where(small, index, np.log(np.logaddexp(0.0, safe)))


def log_series_log_mass(weights: Floats, index: Floats, /) -> Floats:
    """Log probability of whole weights under logarithmic-series laws, p^w / (w log(1 + z)), p = z / (1 + z).

    Parameters
    ----------
    weights : (n,) array; anything but whole numbers >= 1 gets minus infinity
    index : (n,) array of log z; minus infinity puts all mass on 1

    Returns
    -------
    (n,) array, never nan.
    """
    w, penalty = whole_and_possible(weights)
    positive = np.maximum(w, 1.0)
    certain = index == -np.inf
    finite = np.where(certain, 0.0, index)
    log_share = -np.logaddexp(0.0, -finite)
    log_mass = (positive - 1.0) * log_share + (log_share - _log_log_one_plus(finite)) - np.log(positive)
    log_mass = np.where(certain, np.where(w == 1.0, 0.0, -np.inf), np.minimum(log_mass, 0.0))
    return np.where(w >= 1.0, log_mass, -np.inf) + penalty


def log_series_mean_excess(index: Floats, /) -> Floats:
    """z / log(1 + z) - 1: the mean of a logarithmic-series law beyond the first unit; infinite where z overflows."""
    with np.errstate(over="ignore"):
        finite = np.maximum(index, -750.0)
        excess = np.asarray(np.exp(finite - _log_log_one_plus(finite)) - 1.0)
    small = index < _SERIES_INDEX
    z = np.exp(index[small])
    # (z - log(1 + z)) / z as a series; the mean is one over one minus it.
    gap = np.zeros_like(z)
    for k in range(8, 1, -1):
        gap = z * (1.0 / k - gap)
    excess[small] = gap / (1.0 - gap)
    return excess
