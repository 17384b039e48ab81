"""Two hundred simulated networks that are hard on estimators: sizes, zeros, scales, and broken designs."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from enum import Enum

import numpy as np
from scipy.sparse import csr_array

from steelyard.datasets import DyadCovariate, Dyads, Floats, FlowNetwork, Provenance, Transform

N_CASES = 200
COLUMNS = ("size_of_origin", "size_of_destination", "distance", "extra")
SEED = 977


class Defect(Enum):
    """What is wrong with the design, in the column `extra`."""

    NONE = "none"
    COLLINEAR = "extra is a combination of the others"
    NEARLY_COLLINEAR = "extra is a combination of the others, but for a part in 1e5"
    CONSTANT = "extra is the same on every dyad"
    NO_FLOW_WHERE_ONE = "extra is 1 on some dyads, none of which has a flow"
    FLOW_WHERE_ONE = "extra is 1 on some dyads, all of which have a flow"
    UNIT_OUT_OF_RANGE = "extra is measured in millions, distance in millionths"
    FAR_FROM_ZERO = "extra is a date in seconds"


@dataclass(frozen=True)
class Case:
    """One network: everything follows from these fields.

    Attributes
    ----------
    zeros : share of dyads without a flow that the draw aims at
    scale : mean weight of a link, roughly
    dispersion : alpha of the gamma means around which counts are drawn
    """

    number: int
    n_nodes: int
    directed: bool
    zeros: float
    scale: float
    dispersion: float
    defect: Defect

    @property
    def label(self) -> str:
        kind = "directed" if self.directed else "undirected"
        return (
            f"{self.number:03d}: N {self.n_nodes} {kind}, zeros {self.zeros:.2f}, weights {self.scale:.0e}, "
            f"alpha {self.dispersion:g}, {self.defect.name.lower()}"
        )

    def dyads(self) -> Dyads:
        """All dyads of the network with the four covariates."""
        rng = np.random.default_rng((SEED, self.number))
        columns = self._columns(rng)
        flows = self._flows(rng, columns)
        columns["extra"] = self._extra(rng, columns, flows)
        if self.defect is Defect.UNIT_OUT_OF_RANGE:
            columns["distance"] = columns["distance"] * 1e-6
        if not self.directed:
            flows = np.triu(flows)
        network = FlowNetwork(
            labels=tuple(f"place {i + 1}" for i in range(self.n_nodes)),
            flows=csr_array(flows),
            directed=self.directed,
            unit=1.0,
            node_columns={},
            dyad_columns=columns,
            provenance=Provenance("simulated"),
        )
        return Dyads(network, {name: DyadCovariate(name, Transform.NONE) for name in COLUMNS})

    def _columns(self, rng: np.random.Generator) -> dict[str, Floats]:
        size = rng.normal(size=self.n_nodes)
        place = rng.random((self.n_nodes, 2))
        distance = np.log(0.02 + np.hypot(*(place[:, None] - place[None, :]).T))
        if self.directed:
            origin = np.broadcast_to(size[:, None], distance.shape).copy()
            return {"size_of_origin": origin, "size_of_destination": origin.T.copy(), "distance": distance}
        both, gap = size[:, None] + size[None, :], np.abs(size[:, None] - size[None, :])
        return {"size_of_origin": both, "size_of_destination": gap, "distance": distance}

    def _flows(self, rng: np.random.Generator, columns: dict[str, Floats]) -> Floats:
        index = 0.8 * columns["size_of_origin"] + 0.6 * columns["size_of_destination"] - columns["distance"]
        mean = np.exp(index - index.mean()) * self.scale
        around = mean if self.dispersion == 0 else mean * _gamma(rng, self.dispersion, mean.shape)
        flows = rng.poisson(np.minimum(around, 1e15)).astype(float)
        np.fill_diagonal(flows, 0.0)
        propensity = 0.8 * (index - index.mean()) + rng.logistic(size=index.shape)
        off = ~np.eye(self.n_nodes, dtype=bool)
        flows[propensity < np.quantile(propensity[off], self.zeros)] = 0.0
        if not self.directed:
            flows = np.triu(flows, 1)
            flows += flows.T
        return flows

    def _extra(self, rng: np.random.Generator, columns: dict[str, Floats], flows: Floats) -> Floats:
        shape = flows.shape
        noise = rng.normal(size=shape)
        draw = rng.random(shape)
        if not self.directed:
            noise, draw = noise + noise.T, np.maximum(draw, draw.T)
        mix = columns["size_of_origin"] - 2.0 * columns["distance"] + 3.0
        linked = flows > 0
        chosen = {
            Defect.NONE: noise,
            Defect.COLLINEAR: mix,
            Defect.NEARLY_COLLINEAR: mix + 1e-5 * noise,
            Defect.CONSTANT: np.full(shape, 7.3),
            Defect.NO_FLOW_WHERE_ONE: (~linked & (draw > 0.7)).astype(float),
            Defect.FLOW_WHERE_ONE: (linked & (draw > 0.7)).astype(float),
            Defect.UNIT_OUT_OF_RANGE: 1e6 * noise,
            Defect.FAR_FROM_ZERO: 1.7e9 + 1e5 * noise,
        }
        return chosen[self.defect]


def _gamma(rng: np.random.Generator, dispersion: float, shape: tuple[int, ...]) -> Floats:
    return rng.gamma(1.0 / dispersion, dispersion, size=shape)


def cases() -> Iterator[Case]:
    """The 200 cases. Small networks are the more frequent, and every defect occurs 25 times."""
    rng = np.random.default_rng(SEED)
    defects = list(Defect)
    for number in range(N_CASES):
        yield Case(
            number=number,
            n_nodes=int(rng.choice([20, 20, 30, 45, 70, 200], p=[0.25, 0.15, 0.25, 0.2, 0.1, 0.05])),
            directed=bool(rng.random() < 0.6),
            zeros=float(rng.choice([0.0, 0.3, 0.6, 0.85, 0.95])),
            scale=float(rng.choice([0.7, 5.0, 200.0, 1e5, 1e9], p=[0.2, 0.25, 0.25, 0.15, 0.15])),
            dispersion=float(rng.choice([0.0, 0.4, 1.0, 3.0])),
            defect=defects[number % len(defects)],
        )
