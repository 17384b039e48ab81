"""Which laws contain which: what a likelihood-ratio test may be made of, and Vuong's test may not."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from enum import Enum
from types import MappingProxyType
from typing import Any, Protocol, cast, runtime_checkable

from steelyard.models.compose import TwoPart
from steelyard.models.contract import Model

__all__ = ["COVARIATE_FIELDS", "Containing", "Nesting", "Reached", "covariate_names", "nesting"]


class Reached(Enum):
    """How the smaller law is reached within the larger one."""

    INSIDE = "by restrictions inside the parameter space"
    EDGE = "with one parameter at the edge of its range"
    LIMIT = "in a limit where other parameters lose their meaning"


@runtime_checkable
class Containing(Protocol):
    """A model class may declare which laws its own law contains at equal covariates; most declare none."""

    @property
    def contains(self) -> Mapping[str, Reached]:
        """Names of models -> how they are reached."""


# What the built-in laws contain at equal covariates; a plugin declares its own with `contains`.
CONTAINED: Mapping[str, Mapping[str, Reached]] = MappingProxyType(
    {
        "configuration": {"density": Reached.INSIDE},
        "gamma": {"exponential": Reached.INSIDE},
        "logit": {"density": Reached.INSIDE},
        "logit x geometric": {"links_and_total": Reached.INSIDE},
        "negative_binomial": {"poisson": Reached.EDGE},
        "probit": {"density": Reached.INSIDE},
        "truncated_negative_binomial": {"geometric": Reached.INSIDE, "truncated_poisson": Reached.EDGE},
        "zero_inflated_negative_binomial": {
            "negative_binomial": Reached.LIMIT,
            "poisson": Reached.LIMIT,
            "zero_inflated_poisson": Reached.EDGE,
        },
        "zero_inflated_poisson": {"poisson": Reached.LIMIT},
    }
)
# Options whose values name laws of which neither contains the other.
SEPARATING_FIELDS = ("form",)
# Fields that list covariates: a subset of them makes a smaller law of the same kind.
COVARIATE_FIELDS = ("covariates", "inflation")


@dataclass(frozen=True)
class Nesting:
    """One law inside another.

    Attributes
    ----------
    reached : one entry for each way in which the smaller is reached; empty when the two are one law
    declared : False where the two are one kind of law with other options, and nobody says how they relate
    """

    reached: tuple[Reached, ...]
    declared: bool = True


def nesting(smaller: Model, larger: Model) -> Nesting | None:
    """How one model's law lies inside another's; None where it does not.

    A law lies inside one of its own kind with more covariates, and inside those that CONTAINED or a `contains`
    declare; two-part laws are compared part by part.
    """
    if isinstance(smaller, TwoPart) and isinstance(larger, TwoPart):
        return _together(nesting(smaller.links, larger.links), nesting(smaller.weights, larger.weights))
    if type(smaller) is type(larger):
        return _within_one_kind(smaller, larger)
    declared = larger.contains if isinstance(larger, Containing) else CONTAINED.get(larger.name, {})
    reached = declared.get(smaller.name)
    if reached is None:
        return None
    parts = (larger.links, larger.weights) if isinstance(larger, TwoPart) else (larger,)
    found = [_across_kinds(smaller, part) for part in parts]
    return None if None in found else Nesting((reached,), all(found))


def covariate_names(model: Model) -> tuple[str, ...]:
    """Every covariate that a model of one part or a joint model uses, each once."""
    options = _options(model)
    return tuple(dict.fromkeys(name for field in COVARIATE_FIELDS for name in options.get(field, ())))


def _together(links: Nesting | None, weights: Nesting | None) -> Nesting | None:
    if links is None or weights is None:
        return None
    return Nesting(links.reached + weights.reached, links.declared and weights.declared)


def _within_one_kind(smaller: Model, larger: Model) -> Nesting | None:
    """Covariates of the smaller must be among the larger's; another form is another law."""
    few, many = _options(smaller), _options(larger)
    if any(few.get(name) != many.get(name) for name in SEPARATING_FIELDS):
        return None
    ways = []
    for name in COVARIATE_FIELDS:
        less, more = set(few.pop(name, ())), set(many.pop(name, ()))
        if not less <= more:
            return None
        ways += [Reached.INSIDE] if less < more else []
    return Nesting(tuple(ways), few == many)


def _across_kinds(smaller: Model, larger: Model) -> bool | None:
    """Whether shared options agree and others are at their defaults; None where covariates are not contained."""
    few, many = _options(smaller), _options(larger)
    for name in COVARIATE_FIELDS:
        if not set(few.pop(name, ())) <= set(many.pop(name, ())):
            return None
    usual = {f.name: f.default for f in fields(cast(Any, smaller))}
    return all(value == many.get(name, usual[name]) for name, value in few.items())


def _options(model: Model) -> dict[str, Any]:
    return {field.name: getattr(model, field.name) for field in fields(cast(Any, model))}
