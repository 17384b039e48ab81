"""Flows between places: networks, dyads, covariates, and the data sets that ship with Steelyard."""

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.datasets.catalogue import DataSet, dataset_registry
from steelyard.datasets.covariates import (
    Covariate,
    DistanceCovariate,
    DyadCovariate,
    End,
    MatchCovariate,
    NodeCovariate,
    Transform,
)
from steelyard.datasets.dyads import Dyads
from steelyard.datasets.errors import (
    CovariateError,
    DataError,
    RegistrationError,
    SteelyardError,
    UnknownNameError,
)
from steelyard.datasets.flows import FlowNetwork
from steelyard.datasets.plugins import BrokenPlugin, Entry, Registry
from steelyard.datasets.provenance import Provenance
from steelyard.datasets.reading import read_network, read_table
from steelyard.datasets.tables import Columns

__all__ = [
    "Bools",
    "BrokenPlugin",
    "Columns",
    "Covariate",
    "CovariateError",
    "DataError",
    "DataSet",
    "DistanceCovariate",
    "DyadCovariate",
    "Dyads",
    "End",
    "Entry",
    "Floats",
    "FlowNetwork",
    "Integers",
    "MatchCovariate",
    "NodeCovariate",
    "Provenance",
    "RegistrationError",
    "Registry",
    "SteelyardError",
    "Transform",
    "UnknownNameError",
    "dataset_registry",
    "read_network",
    "read_table",
]
