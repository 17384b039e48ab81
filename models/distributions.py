"""Distributions of flows, vectorised over dyads: the values that pass from models to scores.

Each law is one frozen value over n dyads and meets `FlowDistribution`; nothing of the model remains in it.
"""

from __future__ import annotations

from steelyard.models.amount_laws import LognormalLinkLaw
from steelyard.models.cells import CellLaw
from steelyard.models.count_laws import DispersionForm, GeometricLinkLaw, NegativeBinomialLaw, PoissonLaw
from steelyard.models.flow_distribution import AmountsDistribution, FlowDistribution, as_amounts
from steelyard.models.gamma_law import GammaLinkLaw
from steelyard.models.hurdle_law import HurdleLaw
from steelyard.models.link_law import LinkLaw
from steelyard.models.truncated_laws import LogarithmicSeriesLinkLaw, ZeroTruncatedLaw
from steelyard.models.zero_inflated_law import ZeroInflatedLaw

__all__ = [
    "AmountsDistribution",
    "CellLaw",
    "DispersionForm",
    "FlowDistribution",
    "GammaLinkLaw",
    "GeometricLinkLaw",
    "HurdleLaw",
    "LinkLaw",
    "LogarithmicSeriesLinkLaw",
    "LognormalLinkLaw",
    "NegativeBinomialLaw",
    "PoissonLaw",
    "ZeroInflatedLaw",
    "ZeroTruncatedLaw",
    "as_amounts",
]
