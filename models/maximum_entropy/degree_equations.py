"""The configuration model's likelihood on its free dyads: value, gradient and information for Newton's method."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import expit

from steelyard.datasets import Bools, Floats, Integers
from steelyard.models.solvers import Slope

__all__ = ["DegreeEquations", "gauge_directions"]


@dataclass(frozen=True, eq=False)
class DegreeEquations:
    """Sum over free dyads of a theta - log(1 + exp theta), theta_ij = u_i + v_j (undirected: u_i + u_j).

    A point holds the log fitnesses of the nodes that have free dyads: the origins' u, then (directed) the
    destinations' v. The likelihood does not change along the gauge directions (u up, v down, within one
    component); a unit of curvature along each makes the information positive definite and moves no maximum.

    Attributes
    ----------
    links : (P, Q) observed links; undirected: symmetric, P = Q
    free : (P, Q) dyads that count; undirected: symmetric
    gauge : (k, g) orthonormal directions that change no dyad
    directed : whether rows and columns have parameters of their own
    """

    links: Bools
    free: Bools
    gauge: Floats
    directed: bool

    @property
    def degrees(self) -> Floats:
        """Free degrees, in the order of the parameters."""
        seen = (self.links & self.free).astype(np.float64)
        return np.concatenate([seen.sum(axis=1), seen.sum(axis=0)]) if self.directed else seen.sum(axis=1)

    def theta(self, point: Floats) -> Floats:
        """(P, Q) log odds."""
        if not self.directed:
            return point[:, None] + point[None, :]
        height = len(self.links)
        return point[:height, None] + point[None, height:]

    def value(self, point: Floats) -> float:
        theta = self.theta(point)
        # log(1 + e^t) without overflow, summed over free dyads only.
        total = float(np.sum(np.logaddexp(0.0, theta), where=self.free))
        share = 1.0 if self.directed else 0.5
        drift = self.gauge.T @ point
        return float(self.degrees @ point) - share * total - 0.5 * float(drift @ drift)

    def movement(self, step: Floats) -> float:
        return float(np.max(np.abs(self.theta(step)), where=self.free, initial=0.0))

    def slope(self, point: Floats) -> Slope:
        probability = np.where(self.free, expit(self.theta(point)), 0.0)
        degrees = self.degrees
        expected = self._sums(probability)
        drift = self.gauge @ (self.gauge.T @ point)
        information = self.blocks(probability * (1.0 - probability)) + self.gauge @ self.gauge.T
        return Slope(degrees - expected - drift, information, degrees)

    def blocks(self, weights: Floats) -> Floats:
        """(k, k) sum over free dyads of weight x outer product of the dyad's 0/1 parameter indicators."""
        if not self.directed:
            return np.asarray(weights + np.diag(weights.sum(axis=1)))
        rows, columns = weights.sum(axis=1), weights.sum(axis=0)
        return np.block([[np.diag(rows), weights], [weights.T, np.diag(columns)]])

    def _sums(self, matrix: Floats) -> Floats:
        rows = matrix.sum(axis=1)
        return np.concatenate([rows, matrix.sum(axis=0)]) if self.directed else rows

    def start(self) -> Floats:
        """Additive log odds from each node's own share of its free dyads."""
        size = self._sums(self.free.astype(np.float64))
        share = (self.degrees + 0.5) / (size + 1.0)
        overall = float(self.degrees.sum() / size.sum())
        return np.asarray(np.log(share / (1 - share)) - 0.5 * np.log(overall / (1 - overall)))


def gauge_directions(origin_part: Integers, destination_part: Integers, *, directed: bool) -> Floats:
    """(k, g) orthonormal directions along which no free dyad changes.

    Directed: one for each component, u up and v down. Undirected: one for each pair of mirrored components,
    that is, for each part of the network whose free dyads join two sides and never two nodes of one side.
    """
    columns = []
    for part in np.unique(origin_part):
        ups, downs = origin_part == part, destination_part == part
        if directed:
            columns.append(np.concatenate([ups.astype(float), -downs.astype(float)]))
            continue
        # The mirror of a component that holds a node both ways is itself: then the sides mix, and no gauge is
        # left. Of two mirrored components the first speaks for both.
        mirror = origin_part[downs]
        if not (ups & downs).any() and part < mirror.min():
            columns.append(ups.astype(float) - downs.astype(float))
    if not columns:
        return np.zeros((len(origin_part) * (2 if directed else 1), 0))
    return np.column_stack([c / np.linalg.norm(c) for c in columns])
