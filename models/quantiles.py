"""Quantiles by search on the grid of representable weights, so that they hold exactly against the cdf."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from steelyard.datasets.arrays import Bools, Floats, Integers

__all__ = ["of_some", "smallest_weight"]

_WHOLE = 2**53  # from here on every float is a whole number


def _rank(weights: Floats, *, whole: bool) -> Integers:
    """Place of weights >= 0 among all floats, or among all whole floats; increasing, from 0."""
    if not whole:
        return np.ascontiguousarray(weights, dtype=np.float64).view(np.int64)
    small = weights < _WHOLE
    first = np.float64(_WHOLE).view(np.int64)
    large = np.maximum(weights, float(_WHOLE)).view(np.int64) - first + _WHOLE
    return np.where(small, np.where(small, weights, 0.0).astype(np.int64), large)


def _weight(rank: Integers, *, whole: bool) -> Floats:
    """Inverse of `_rank`."""
    if not whole:
        return rank.view(np.float64)
    first = np.float64(_WHOLE).view(np.int64)
    large = (np.maximum(rank, _WHOLE) - _WHOLE + first).view(np.float64)
    return np.where(rank < _WHOLE, rank.astype(np.float64), large)


def of_some(cdf: Callable[[Floats], Floats], n: int, /) -> Callable[[Floats, Integers], Floats]:
    """Turn a cdf of all n dyads into one of some: it is computed for all, the rest at zero."""

    def cdf_of_some(weights: Floats, which: Integers) -> Floats:
        everywhere = np.zeros(n)
        everywhere[which] = weights
        return cdf(everywhere)[which]

    return cdf_of_some


def smallest_weight(
    cdf: Callable[[Floats, Integers], Floats], level: Floats, guess: Floats, top: Floats, *, whole: bool
) -> Floats:
    """Smallest representable weight w with cdf(w) >= level.

    A good guess costs two evaluations, one that is k grid points off about 2 log2(k) more for that dyad.

    Parameters
    ----------
    cdf : maps (m,) weights of the dyads whose (m,) places stand in the second argument to their
        probabilities; non-decreasing, 1 at infinity
    level : (n,) array within [0, 1]
    guess : (n,) array, where to start; nan counts as 0
    top : (n,) array, the answer at level 1, where rounding of the cdf must not decide
    whole : whether the weights are whole numbers

    Returns
    -------
    (n,) array, >= 0.
    """
    searched = level < 1.0
    start = np.where(searched & (guess > 0.0), guess, 0.0)
    last = int(_rank(np.array([np.inf]), whole=whole)[0])

    def reached(rank: Integers, which: Integers) -> Bools:
        at_least = np.full(len(which), False)
        some = rank >= 0
        at_least[some] = cdf(_weight(rank[some], whole=whole), which[some]) >= level[which[some]]
        return at_least

    high = _rank(np.floor(start) if whole else start, whole=whole).copy()
    low = high - 1
    step = 1
    pending = np.flatnonzero(searched)
    while len(pending := pending[~reached(high[pending], pending) & (high[pending] < last)]):
        low[pending] = high[pending]
        high[pending] += np.minimum(step, last - high[pending])
        step *= 2
    step = 1
    pending = np.flatnonzero(searched)
    while len(pending := pending[reached(low[pending], pending)]):
        high[pending] = low[pending]
        low[pending] = np.maximum(low[pending] - step, -1)
        step *= 2
    while len(pending := np.flatnonzero(high - low > 1)):
        middle = low[pending] + (high[pending] - low[pending]) // 2
        over = reached(middle, pending)
        high[pending[over]] = middle[over]
        low[pending[~over]] = middle[~over]
    return np.where(searched, _weight(high, whole=whole), top)
