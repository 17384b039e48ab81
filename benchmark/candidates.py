"""Candidates: a model with its covariates and options under a label."""

from __future__ import annotations

from dataclasses import dataclass

from steelyard.models import Model, TwoPart

__all__ = ["Candidate"]


@dataclass(frozen=True)
class Candidate:
    """One entry of a study.

    Attributes
    ----------
    label : distinct within the study
    model : what is fitted, with all its options
    """

    label: str
    model: Model

    @property
    def part_names(self) -> tuple[str, str]:
        """Names of the model of links and of the model of weights, as the table of candidates shows them."""
        if isinstance(self.model, TwoPart):
            return self.model.links.name, self.model.weights.name
        both = self.model.part.value
        return {
            "joint": (f"{self.model.name} (joint)", f"{self.model.name} (joint)"),
            "links": (self.model.name, "none"),
            "weights": ("given", self.model.name),
        }[both]

    @property
    def parts(self) -> tuple[Model, ...]:
        """The models it consists of."""
        if isinstance(self.model, TwoPart):
            return (self.model.links, self.model.weights)
        return (self.model,)
