"""The models that ship with Steelyard and those that installed packages add."""

from __future__ import annotations

from dataclasses import Field, fields, is_dataclass
from types import MappingProxyType
from typing import Any, ClassVar, Protocol, cast

from steelyard.datasets import RegistrationError, Registry
from steelyard.datasets.plugins import built_in_entries
from steelyard.models.contract import Family, Holdout, Information, Model, Need, Part, Requirements
from steelyard.models.measure import Measure

__all__ = ["ModelClass", "model_registry"]

ENTRY_POINTS = "steelyard.models"
BUILT_IN = MappingProxyType(
    {
        "configuration": "steelyard.models.maximum_entropy.configuration:ConfigurationModel",
        "density": "steelyard.models.maximum_entropy.density:DensityModel",
        "gamma": "steelyard.models.econometric.gamma:GammaModel",
        "geometric": "steelyard.models.maximum_entropy.geometric:GeometricModel",
        "logit": "steelyard.models.econometric.logit:LogitModel",
        "lognormal": "steelyard.models.econometric.lognormal:LognormalModel",
        "negative_binomial": "steelyard.models.econometric.negative_binomial:NegativeBinomialModel",
        "poisson": "steelyard.models.econometric.poisson:PoissonModel",
        "probit": "steelyard.models.econometric.probit:ProbitModel",
        "truncated_negative_binomial": (
            "steelyard.models.econometric.truncated_negative_binomial:TruncatedNegativeBinomialModel"
        ),
        "truncated_poisson": "steelyard.models.econometric.truncated_poisson:TruncatedPoissonModel",
    }
)
# What a registered class must declare, and of which type.
DECLARED: tuple[tuple[str, type], ...] = (
    ("name", str),
    ("family", Family),
    ("part", Part),
    ("holdouts", frozenset),
    ("directed", frozenset),
    ("information", Information),
    ("requires", Requirements),
    ("summary", str),
    ("formula", str),
    ("parameters", str),
    ("caution", str),
    ("sources", str),
)


class ModelClass(Protocol):
    """A registered class: its attributes are declarations, and calling it with options makes a model."""

    __dataclass_fields__: ClassVar[dict[str, Field[Any]]]
    name: str
    family: Family
    part: Part
    measure: Measure | None
    holdouts: frozenset[Holdout]
    directed: frozenset[bool]
    information: Information
    requires: Requirements
    summary: str
    formula: str
    parameters: str
    caution: str
    sources: str

    def __call__(self, **options: Any) -> Model:
        """A model with these options."""


def model_registry() -> Registry[ModelClass]:
    """Built-in models and those that installed packages offer under the entry-point group `steelyard.models`.

    What is registered is a frozen dataclass whose fields are the model's options and whose class attributes
    are its declarations.
    """
    registry: Registry[ModelClass] = Registry("model", _checked, built_in_entries(BUILT_IN))
    return registry.with_entry_points(ENTRY_POINTS)


def _checked(name: str, candidate: object) -> ModelClass:
    """The class, if it keeps the contract.

    Raises
    ------
    RegistrationError : with the first rule that it breaks
    """
    if not (isinstance(candidate, type) and is_dataclass(candidate)):
        raise RegistrationError(f"a model must be a frozen dataclass; got {candidate!r}")
    if not getattr(candidate, "__dataclass_params__").frozen:  # noqa: B009 - typeshed leaves it out
        raise RegistrationError(f"{candidate.__name__} must be frozen: @dataclass(frozen=True)")
    for attribute, kind in DECLARED:
        if not isinstance(getattr(candidate, attribute, None), kind):
            raise RegistrationError(
                f"{candidate.__name__} must declare the class attribute '{attribute}' as {kind.__name__}"
            )
    if not isinstance(getattr(candidate, "measure", 0), Measure | None):
        raise RegistrationError(f"{candidate.__name__} must declare the class attribute 'measure', or None")
    if not callable(getattr(candidate, "fit", None)):
        raise RegistrationError(f"{candidate.__name__} must have a method fit(dyads)")
    model = cast(ModelClass, candidate)
    _check_consistency(name, candidate.__name__, model)
    return model


def _check_consistency(name: str, title: str, model: ModelClass) -> None:
    """Rules between declarations."""
    if model.name != name:
        raise RegistrationError(
            f"{title} must declare name = '{name}', as it is registered; got '{model.name}'"
        )
    if not model.holdouts or not all(isinstance(h, Holdout) for h in model.holdouts):
        raise RegistrationError(f"{title} must declare at least one Holdout in 'holdouts'")
    takes = any(f.name == "covariates" for f in fields(model))
    if takes == (model.requires.covariates is Need.NONE):
        raise RegistrationError(
            f"{title} must have a field 'covariates' exactly when it declares a need for them"
        )
