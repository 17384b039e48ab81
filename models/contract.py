"""What a model is: the one place that says it. Typed protocols and frozen declarations, no base class.

A *model* is a frozen value that holds options and can be fitted to dyads. A *fitted* model holds estimates and
no training data. A *law* is a fitted model that states a probability distribution for each dyad.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from typing import Protocol, runtime_checkable

from steelyard.datasets import Dyads, Floats
from steelyard.models.distributions import FlowDistribution
from steelyard.models.estimates import Estimates
from steelyard.models.measure import Measure

__all__ = [
    "Convergence",
    "Family",
    "Fitted",
    "Holdout",
    "Information",
    "Law",
    "Model",
    "Need",
    "Part",
    "Requirements",
]


class Family(Enum):
    """The school a model comes from; a two-part law may take its parts from both."""

    ECONOMETRIC = "econometric"
    MAXIMUM_ENTROPY = "maximum-entropy"
    MIXED = "mixed"


class Part(Enum):
    """What a model explains: which links exist, how heavy a given link is, or both at once."""

    LINKS = "links"
    WEIGHTS = "weights"
    JOINT = "joint"


class Holdout(Enum):
    """What a fitted model can be scored on."""

    DYADS = "unseen dyads between known nodes"
    NODES = "all dyads of unseen nodes"
    PERIODS = "a later period of the same nodes"


class Information(Enum):
    """What a candidate is told of the observed network besides its covariates."""

    COVARIATES = "covariates"
    DENSITY = "density"
    DEGREES = "degrees"
    STRENGTHS = "strengths"
    DEGREES_AND_STRENGTHS = "degrees and strengths"

    def joined(self, other: Information) -> Information:
        """What two parts are told together."""
        node = {Information.DEGREES, Information.STRENGTHS, Information.DEGREES_AND_STRENGTHS}
        told = {self, other}
        if len(told & node) == 2:
            return Information.DEGREES_AND_STRENGTHS
        for tier in (*node, Information.DENSITY):
            if tier in told:
                return tier
        return Information.COVARIATES


class Need(Enum):
    """Whether a model takes covariates."""

    NONE = "none"
    OPTIONAL = "optional"
    REQUIRED = "required"


@dataclass(frozen=True)
class Requirements:
    """What a model asks of a study.

    Attributes
    ----------
    covariates : whether it takes any
    node_columns : columns of the data by name
    otherwise : what to use instead on the kind of network that its `directed` leaves out
    """

    covariates: Need = Need.NONE
    node_columns: tuple[str, ...] = ()
    otherwise: str = ""


@dataclass(frozen=True)
class Convergence:
    """Whether a fit is one, the same for every solver.

    Attributes
    ----------
    converged : all estimates finite, residual <= 1e-8 (or Newton decrement <= 1e-10), and the information
        positive definite on the identified space. Never an optimiser's own flag
    iterations : Newton steps, 0 for closed forms
    residual : worst gradient component or violated constraint, relative to its scale
    message : why it did not converge, and what was fixed, dropped or found at the boundary
    """

    converged: bool
    iterations: int
    residual: float
    message: str = ""


class Fitted(Protocol):
    """A fitted model: a mean for each dyad; immutable, and holding no training data."""

    @property
    def estimates(self) -> Estimates:
        """The parameters with their standard errors."""

    @property
    def n_parameters(self) -> int:
        """Identified free parameters: a rank, not a count of names."""

    @property
    def convergence(self) -> Convergence:
        """The certificate of the fit."""

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        """(n,) expected amounts in the study's unit; for a LINKS model the link probability, for a WEIGHTS
        model the expected weight given a link."""


class Law(Fitted, Protocol):
    """A fitted model that states a distribution for each dyad."""

    @property
    def measure(self) -> Measure:
        """What the distribution puts probability on."""

    def distribution(self, dyads: Dyads, /) -> FlowDistribution:
        """The law of the flow on each of the n dyads (given a link, for a WEIGHTS model)."""


@runtime_checkable
class Model(Protocol):
    """A model with its options: frozen, and fitted by `fit`, which sees the training dyads and nothing else."""

    @property
    def name(self) -> str:
        """The name it is registered under."""

    @property
    def family(self) -> Family:
        """The school it comes from."""

    @property
    def part(self) -> Part:
        """What it explains."""

    @property
    def measure(self) -> Measure | None:
        """What its law puts probability on; None for a mean only (a pseudo-likelihood on amounts)."""

    @property
    def holdouts(self) -> frozenset[Holdout]:
        """What it can be scored on."""

    @property
    def directed(self) -> frozenset[bool]:
        """Which kinds of network it can be fitted to."""

    @property
    def information(self) -> Information:
        """What it is told of the observed network."""

    @property
    def requires(self) -> Requirements:
        """What it asks of a study."""

    @property
    def summary(self) -> str:
        """One or two sentences of the method sheet: what it assumes."""

    @property
    def formula(self) -> str:
        """The law as a formula in plain text."""

    @property
    def parameters(self) -> str:
        """What is estimated, how, and how many parameters count."""

    @property
    def caution(self) -> str:
        """When not to use it."""

    @property
    def sources(self) -> str:
        """Publications, author-year or DOI."""

    def fit(self, dyads: Dyads, /) -> Fitted:
        """Fit to these dyads.

        Raises
        ------
        ModelError : the dyads do not allow it
        """
