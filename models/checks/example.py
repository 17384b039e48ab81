"""A small made-up network on which every model can be fitted, and the variations that checks need."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType

import numpy as np
from scipy.sparse import csr_array

from steelyard.datasets import (
    Bools,
    Covariate,
    DyadCovariate,
    Dyads,
    End,
    Floats,
    FlowNetwork,
    Integers,
    NodeCovariate,
    Provenance,
    Transform,
)

__all__ = ["EXAMPLE_COVARIATES", "ExampleFlows"]

# Names that the example's dyads know; both are defined for directed and for undirected networks.
EXAMPLE_COVARIATES = ("size", "distance")
_DEFINITIONS: Mapping[str, Covariate] = MappingProxyType(
    {
        "size": NodeCovariate("size", End.BOTH, Transform.LOG),
        "distance": DyadCovariate("distance", Transform.LOG),
    }
)
_SEED = 20_260


@dataclass(frozen=True, eq=False)
class ExampleFlows:
    """Twenty-four invented places, about half of whose dyads carry whole flows.

    Parameters
    ----------
    directed : which kind of network
    flows : (N, N) other flows in place of the example's own
    order : (N,) the places in another order
    unit : the amount that one count stands for
    """

    directed: bool
    flows: Floats | None = None
    order: Integers | None = None
    unit: float = 1.0

    n_nodes = 24

    @property
    def dyads(self) -> Dyads:
        """All dyads, with the covariates EXAMPLE_COVARIATES."""
        size, distance = _places(self.n_nodes)
        flows = _own_flows(size, distance) if self.flows is None else self.flows
        order = np.arange(self.n_nodes) if self.order is None else self.order
        labels = [f"place {i + 1}" for i in order]
        flows, distance, size = flows[np.ix_(order, order)], distance[np.ix_(order, order)], size[order]
        if not self.directed:
            flows = np.triu(flows + flows.T, 1)
        network = FlowNetwork(
            labels=tuple(labels),
            flows=csr_array(flows),
            directed=self.directed,
            unit=self.unit,
            node_columns={"size": size},
            dyad_columns={"distance": distance},
            provenance=Provenance("invented for checks"),
        )
        return Dyads(network, _DEFINITIONS)

    def new_order(self) -> Integers:
        """(N,) the places in another order, for `order`."""
        return np.random.default_rng(_SEED + 1).permutation(self.n_nodes).astype(np.int64)

    def training_mask(self) -> Bools:
        """(N, N) True on about four fifths of the pairs, symmetric."""
        draw = np.random.default_rng(_SEED + 2).random((self.n_nodes, self.n_nodes))
        return np.asarray((np.triu(draw, 1) + np.triu(draw, 1).T) < 0.8)

    def changed_outside(self, mask: Bools) -> ExampleFlows:
        """The same network with other flows on the dyads outside the mask."""
        size, distance = _places(self.n_nodes)
        own = _own_flows(size, distance)
        other = np.where(own > 0, 0.0, 7.0) + np.where(own > 0, 0.0, 1.0) * np.arange(self.n_nodes)
        np.fill_diagonal(other, 0.0)
        return replace(self, flows=np.where(mask, own, other))

    def with_drawn(self, weights: Floats) -> ExampleFlows:
        """The same network with other weights on its dyads, in their order."""
        dyads = self.dyads
        flows = np.zeros((self.n_nodes, self.n_nodes))
        flows[dyads.origin, dyads.destination] = weights
        return replace(self, flows=flows)


def _places(n: int) -> tuple[Floats, Floats]:
    """Sizes and symmetric distances."""
    rng = np.random.default_rng(_SEED)
    size = np.round(np.exp(rng.normal(2.0, 0.8, n)), 3).astype(np.float64)
    x, y = rng.random(n), rng.random(n)
    distance = np.round(100.0 * np.hypot(x[:, None] - x[None, :], y[:, None] - y[None, :]) + 5.0, 3)
    return size, distance


def _own_flows(size: Floats, distance: Floats) -> Floats:
    """Links by a logit and weights by a discretised gamma around a gravity mean, from a fixed seed."""
    rng = np.random.default_rng(_SEED + 3)
    mass = np.log(size)[:, None] + np.log(size)[None, :]
    index = 0.9 * (mass - mass.mean()) - 0.8 * (np.log(distance) - np.log(distance).mean())
    links = rng.random(distance.shape) < 1.0 / (1.0 + np.exp(-0.8 * index))
    weights = 1.0 + np.floor(rng.gamma(0.9, 8.0 * np.exp(0.7 * index)))
    flows = np.where(links, weights, 0.0)
    np.fill_diagonal(flows, 0.0)
    return flows
