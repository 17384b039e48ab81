"""TwoPart: any law of links with any law of weights given a link, as one joint law.

Hurdle models, conditional maximum-entropy models and every mixture of the two families are this one class.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import (
    Convergence,
    Family,
    Fitted,
    Holdout,
    Information,
    Law,
    Model,
    Need,
    Part,
    Requirements,
)
from steelyard.models.distributions import FlowDistribution, HurdleLaw, LinkLaw
from steelyard.models.errors import ModelError
from steelyard.models.estimates import Estimates
from steelyard.models.measure import Measure

__all__ = ["FittedTwoPart", "TwoPart"]


@dataclass(frozen=True)
class FittedTwoPart:
    """A fitted law of links and a fitted law of weights given a link, independent of each other."""

    links: Law
    weights: Law

    @property
    def estimates(self) -> Estimates:
        return self.links.estimates + self.weights.estimates

    @property
    def n_parameters(self) -> int:
        return self.links.n_parameters + self.weights.n_parameters

    @property
    def convergence(self) -> Convergence:
        """Converged when both parts are; the worse residual; both messages, each under its part's name."""
        first, second = self.links.convergence, self.weights.convergence
        said = [f"{p}: {c.message}" for p, c in (("links", first), ("weights", second)) if c.message]
        return Convergence(
            first.converged and second.converged,
            first.iterations + second.iterations,
            max(first.residual, second.residual),
            "; ".join(said),
        )

    @property
    def measure(self) -> Measure:
        return self.weights.measure

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        probability = self.links.expected_weight(dyads)
        # Where no link can be, an infinite conditional mean must not make 0 x inf.
        given = np.where(probability > 0, self.weights.expected_weight(dyads), 0.0)
        return np.asarray(probability * given)

    def distribution(self, dyads: Dyads, /) -> FlowDistribution:
        links = self.links.distribution(dyads)
        if not isinstance(links, LinkLaw):
            raise ModelError(f"a law of links must give a LinkLaw; got {type(links).__name__}")
        return HurdleLaw(links, self.weights.distribution(dyads))


@dataclass(frozen=True)
class TwoPart:
    """A model of links and a model of weights given a link, each fitted by its own likelihood.

    Parameters
    ----------
    links : a model whose part is LINKS
    weights : a model whose part is WEIGHTS and that states a distribution

    Raises
    ------
    ModelError : a part is of the wrong kind
    """

    links: Model
    weights: Model

    part: ClassVar[Part] = Part.JOINT

    def __post_init__(self) -> None:
        for wanted, model in ((Part.LINKS, self.links), (Part.WEIGHTS, self.weights)):
            if model.part is not wanted:
                raise ModelError(
                    f"the {wanted.value} part must be a model of {wanted.value}; '{model.name}' is a model of "
                    f"{'both at once' if model.part is Part.JOINT else model.part.value}"
                )
            if model.measure is None:
                raise ModelError(f"'{model.name}' states only a mean, so it cannot be a part of a joint law")

    @property
    def name(self) -> str:
        return f"{self.links.name} x {self.weights.name}"

    @property
    def family(self) -> Family:
        return self.links.family if self.links.family is self.weights.family else Family.MIXED

    @property
    def measure(self) -> Measure | None:
        return self.weights.measure

    @property
    def holdouts(self) -> frozenset[Holdout]:
        return self.links.holdouts & self.weights.holdouts

    @property
    def directed(self) -> frozenset[bool]:
        return self.links.directed & self.weights.directed

    @property
    def information(self) -> Information:
        return self.links.information.joined(self.weights.information)

    @property
    def requires(self) -> Requirements:
        parts = (self.links.requires, self.weights.requires)
        needs = {p.covariates for p in parts}
        need = next(n for n in (Need.REQUIRED, Need.OPTIONAL, Need.NONE) if n in needs)
        columns = dict.fromkeys(c for p in parts for c in p.node_columns)
        return Requirements(need, tuple(columns))

    @property
    def summary(self) -> str:
        return f"Links: {self.links.summary} Weights: {self.weights.summary}"

    @property
    def formula(self) -> str:
        return f"P(0) = 1 - p;  P(w) = p P(w | link);  links: {self.links.formula};  weights: {self.weights.formula}"

    @property
    def parameters(self) -> str:
        return f"links: {self.links.parameters};  weights: {self.weights.parameters}"

    @property
    def caution(self) -> str:
        return f"Links: {self.links.caution} Weights: {self.weights.caution}"

    @property
    def sources(self) -> str:
        parts = dict.fromkeys((self.links.sources, self.weights.sources))
        return "; ".join(("Cragg (1971); Mullahy (1986) for the two parts", *parts))

    def fit(self, dyads: Dyads, /) -> FittedTwoPart:
        """Fit both parts to the same dyads; the likelihood is their product, so each is at its own maximum."""
        return FittedTwoPart(_as_law(self.links.fit(dyads)), _as_law(self.weights.fit(dyads)))


def _as_law(fitted: Fitted) -> Law:
    """Models whose `measure` is not None promise a law; this says so to the type checker and to plugin authors."""
    if not callable(getattr(fitted, "distribution", None)):
        raise ModelError(
            f"{type(fitted).__name__} states no distribution, though its model declares a measure"
        )
    return fitted  # type: ignore[return-value]  # checked above; a runtime protocol cannot check properties
