"""The configuration model: link probabilities that reproduce every node's expected degree."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy.special import expit

from steelyard.datasets import Bools, Dyads, Floats, Integers
from steelyard.models.contract import Convergence, Family, Holdout, Information, Part, Requirements
from steelyard.models.distributions import LinkLaw
from steelyard.models.estimates import ErrorKind, Estimate, EstimatePart, Estimates, Status
from steelyard.models.maximum_entropy.degree_equations import DegreeEquations, gauge_directions
from steelyard.models.maximum_entropy.support import Support, degree_support
from steelyard.models.measure import Measure
from steelyard.models.solvers import Maximum, newton_maximise

__all__ = ["ConfigurationModel", "FittedConfiguration"]


@dataclass(frozen=True, eq=False)
class FittedConfiguration:
    """Log odds of a link: the origin's log fitness plus the destination's, or fixed at the boundary.

    Attributes
    ----------
    origin_fitness, destination_fitness : (N,) log fitnesses; equal when undirected; 0 where none is finite
    support : which dyads are free, surely linked or surely empty
    undetermined : log odds for a dyad that the training dyads say nothing about, that of their density
    """

    origin_fitness: Floats
    destination_fitness: Floats
    support: Support
    undetermined: float
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.LINKS

    def log_odds(self, dyads: Dyads) -> Floats:
        """(n,) log odds, infinite on dyads fixed at 0 or 1."""
        i, j = dyads.origin, dyads.destination
        odds = np.full(len(i), self.undetermined)
        odds[self.support.surely_linked(i, j)] = np.inf
        odds[self.support.surely_empty(i, j)] = -np.inf
        free = self.support.free(i, j)
        odds[free] = (self.origin_fitness[i] + self.destination_fitness[j])[free]
        return odds

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).link_probability

    def distribution(self, dyads: Dyads, /) -> LinkLaw:
        return LinkLaw.from_log_odds(self.log_odds(dyads))


@dataclass(frozen=True)
class ConfigurationModel:
    """Expected degrees equal observed ones, out and in where the network is directed; it has no options yet."""

    name: ClassVar[str] = "configuration"
    family: ClassVar[Family] = Family.MAXIMUM_ENTROPY
    part: ClassVar[Part] = Part.LINKS
    measure: ClassVar[Measure] = Measure.LINKS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset({Holdout.DYADS, Holdout.PERIODS})
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.DEGREES
    requires: ClassVar[Requirements] = Requirements()
    summary: ClassVar[str] = (
        "Of all laws of links whose expected degrees are the observed ones, the least committal: links are "
        "independent, and each node has a fitness as origin and one as destination."
    )
    formula: ClassVar[str] = (
        "p_ij = x_i y_j / (1 + x_i y_j);  undirected x_i x_j / (1 + x_i x_j);  terms are log x and log y"
    )
    parameters: ClassVar[str] = (
        "expected degrees = observed degrees (maximum likelihood, concave); N undirected, 2N - 1 directed, fewer "
        "at the boundary. Directed, the free log x and the free log y are given equal sums"
    )
    caution: ClassVar[str] = (
        "It is told every degree: compare it within its information tier. A node whose training dyads are all "
        "empty (or all linked) is given probability 0 (or 1) on its other dyads too, so a held-out link there "
        "is an impossible observation. It says nothing of unseen nodes."
    )
    sources: ClassVar[str] = (
        "Holland & Leinhardt (1981); Park & Newman (2004); Chatterjee, Diaconis & Sly (2011); Rinaldo, Petrovic "
        "& Fienberg (2013); Yan et al. (2019)"
    )

    def fit(self, dyads: Dyads, /) -> FittedConfiguration:
        """Match the degrees that these dyads show."""
        sample = _Sample.of(dyads)
        equations = sample.equations()
        maximum = newton_maximise(equations, equations.start()) if equations.free.any() else None
        origin, destination = sample.spread(maximum)
        return FittedConfiguration(
            origin_fitness=origin,
            destination_fitness=destination,
            support=sample.support,
            undetermined=_density_log_odds(dyads),
            estimates=_estimates(sample, equations, maximum),
            n_parameters=0 if maximum is None else len(maximum.point) - equations.gauge.shape[1],
            convergence=_convergence(sample, maximum),
        )


@dataclass(frozen=True, eq=False)
class _Sample:
    """Training dyads as matrices, and which nodes keep a finite fitness as origin and as destination."""

    labels: tuple[str, ...]
    directed: bool
    links: Bools
    known: Bools
    support: Support
    origins: Integers
    destinations: Integers

    @classmethod
    def of(cls, dyads: Dyads) -> _Sample:
        n = dyads.n_nodes
        links, known = np.zeros((n, n), dtype=bool), np.zeros((n, n), dtype=bool)
        known[dyads.origin, dyads.destination] = True
        links[dyads.origin, dyads.destination] = dyads.links
        support = degree_support(links, known, directed=dyads.directed)
        if not dyads.directed:
            links, known = links | links.T, known | known.T
        free = known & (support.origin_part[:, None] == support.destination_part[None, :])
        origins, destinations = np.flatnonzero(free.any(axis=1)), np.flatnonzero(free.any(axis=0))
        return cls(dyads.labels, dyads.directed, links, known, support, origins, destinations)

    def equations(self) -> DegreeEquations:
        """The likelihood over the nodes that have free dyads."""
        origin_part = self.support.origin_part[self.origins]
        destination_part = self.support.destination_part[self.destinations]
        inside = np.ix_(self.origins, self.destinations)
        free = self.known[inside] & (origin_part[:, None] == destination_part[None, :])
        gauge = gauge_directions(origin_part, destination_part, directed=self.directed)
        return DegreeEquations(self.links[inside], free, gauge, self.directed)

    def spread(self, maximum: Maximum | None) -> tuple[Floats, Floats]:
        """Log fitnesses of all N nodes as origins and as destinations; 0 where none is finite."""
        origin, destination = np.zeros(len(self.labels)), np.zeros(len(self.labels))
        if maximum is None:
            return origin, destination
        origin[self.origins] = maximum.point[: len(self.origins)]
        destination[self.destinations] = maximum.point[-len(self.destinations) :]
        return origin, destination

    def edge_value(self, node: int, axis: int) -> float:
        """Log fitness of a node without free dyads: infinite, or nan where its dyads are fixed both ways."""
        links, known = (
            (self.links[node], self.known[node]) if axis else (self.links[:, node], self.known[:, node])
        )
        seen = links[known]
        if seen.size and seen.all():
            return np.inf
        return -np.inf if not seen.any() else np.nan

    def roles(self) -> list[tuple[str, Integers, int]]:
        """(suffix of the term, nodes with a finite fitness, axis) for each kind of fitness."""
        if not self.directed:
            return [("", self.origins, 1)]
        return [(":origin", self.origins, 1), (":destination", self.destinations, 0)]


def _density_log_odds(dyads: Dyads) -> float:
    share = dyads.n_links / len(dyads)
    with np.errstate(divide="ignore"):
        return float(np.log(share) - np.log1p(-share))


def _standard_errors(equations: DegreeEquations, maximum: Maximum) -> dict[ErrorKind, Floats]:
    """Model and robust standard errors in the gauge of the equations.

    Node-clustered errors are left out: a node's own score total is its degree constraint, zero by construction,
    so that variance would be about nothing.
    """
    if not maximum.convergence.converged:
        return {}
    bread = np.linalg.inv(maximum.information) - equations.gauge @ equations.gauge.T
    probability = np.where(equations.free, expit(equations.theta(maximum.point)), 0.0)
    squares = np.where(equations.free, (equations.links - probability) ** 2, 0.0)
    n = int(equations.free.sum()) // (1 if equations.directed else 2)
    k = len(maximum.point) - equations.gauge.shape[1]
    factor = n / (n - k) if n > k else np.nan
    robust = np.einsum("ij,jk,ki->i", bread, equations.blocks(squares), bread, optimize=True)
    return {
        ErrorKind.MODEL: np.sqrt(np.diag(bread)),
        ErrorKind.ROBUST: np.sqrt(np.maximum(factor * robust, 0.0)),
    }


def _estimates(sample: _Sample, equations: DegreeEquations, maximum: Maximum | None) -> Estimates:
    """A row for every node and role; those without a finite fitness say so."""
    errors = {} if maximum is None else _standard_errors(equations, maximum)
    rows: list[Estimate] = []
    offset = 0
    for suffix, nodes, axis in sample.roles():
        place = {int(node): offset + k for k, node in enumerate(nodes)}
        offset += len(nodes)
        for node, label in enumerate(sample.labels):
            term = f"node:{label}{suffix}"
            if node in place and maximum is not None:
                own = {kind: float(values[place[node]]) for kind, values in errors.items()}
                rows.append(Estimate(EstimatePart.LINKS, term, float(maximum.point[place[node]]), own))
            else:
                value = sample.edge_value(node, axis)
                note = "all its dyads are fixed at 0 or 1"
                rows.append(Estimate(EstimatePart.LINKS, term, value, {}, Status.BOUNDARY, note=note))
    return Estimates(tuple(rows))


def _convergence(sample: _Sample, maximum: Maximum | None) -> Convergence:
    """The certificate, with the nodes at the boundary counted and the first of them named."""
    fixed = [
        f"{label}{suffix.replace(':', ' as ')}"
        for suffix, nodes, _ in sample.roles()
        for node, label in enumerate(sample.labels)
        if node not in set(nodes.tolist())
    ]
    said = []
    if fixed:
        named = ", ".join(fixed[:5]) + (" ..." if len(fixed) > 5 else "")
        said.append(
            f"{len(fixed)} node {'fitness' if len(fixed) == 1 else 'fitnesses'} at the boundary: {named}"
        )
    if maximum is None:
        return Convergence(True, 0, 0.0, "; ".join(said))
    found = maximum.convergence
    message = "; ".join(m for m in (found.message, *said) if m)
    return Convergence(found.converged, found.iterations, found.residual, message)
