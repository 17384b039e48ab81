"""Models of flows: the contract, the laws, the estimators of both families, and their registry."""

from steelyard.models.compose import TwoPart
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
from steelyard.models.distributions import FlowDistribution
from steelyard.models.errors import ModelError
from steelyard.models.estimates import ErrorKind, Estimate, EstimatePart, Estimates, Status
from steelyard.models.measure import Measure
from steelyard.models.nesting import Reached
from steelyard.models.registry import ModelClass, model_registry

__all__ = [
    "Convergence",
    "ErrorKind",
    "Estimate",
    "EstimatePart",
    "Estimates",
    "Family",
    "Fitted",
    "FlowDistribution",
    "Holdout",
    "Information",
    "Law",
    "Measure",
    "Model",
    "ModelClass",
    "ModelError",
    "Need",
    "Part",
    "Reached",
    "Requirements",
    "Status",
    "TwoPart",
    "model_registry",
]
