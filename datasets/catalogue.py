"""The data sets that ship with Steelyard, and those that installed packages add."""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial
from importlib.resources import as_file, files
from pathlib import Path
from typing import Any

from steelyard.datasets.errors import DataError, RegistrationError
from steelyard.datasets.flows import FlowNetwork
from steelyard.datasets.plugins import Entry, Registry
from steelyard.datasets.provenance import Provenance
from steelyard.datasets.reading import read_table
from steelyard.datasets.tables import Columns, network_from_frames

__all__ = ["DataSet", "dataset_registry"]

PACKAGE = "steelyard.datasets"


@dataclass(frozen=True)
class DataSet:
    """A catalogued data set: tables of one or several periods and how to read them.

    Attributes
    ----------
    name : how a study file calls it
    summary : one sentence: what flows between what
    provenance : source, licence, what one unit of flow is, and what was done before it came here
    package : the Python package whose folder holds the files
    flows, nodes, dyads : files below that package's folder, or None
    columns : the key columns of the files
    periods : what `period` may be; empty when the data have one period only
    described : (column, meaning and unit) of each node and dyad column
    """

    name: str
    summary: str
    provenance: Provenance
    package: str
    flows: str
    nodes: str | None
    dyads: str | None
    columns: Columns
    periods: tuple[str, ...]
    described: tuple[tuple[str, str], ...]

    def table(self, file: str) -> Any:
        """One of the files as a table of texts."""
        with as_file(files(self.package).joinpath(file)) as path:
            return read_table(Path(path))

    def load(self, *, directed: bool = True, unit: float = 1.0, period: str | None = None) -> FlowNetwork:
        """The flow network of one period; the last one when `period` is not given.

        Raises
        ------
        DataError : there is no such period
        """
        period = (self.periods[-1] if self.periods else None) if period is None else str(period)
        if period is not None and period not in self.periods:
            known = ", ".join(self.periods) or "none, so leave period out"
            raise DataError(f"data set '{self.name}' has no period '{period}'; it holds {known}")
        names = (self.flows, self.nodes or "", self.dyads or "")
        return network_from_frames(
            self.table(self.flows),
            None if self.nodes is None else self.table(self.nodes),
            None if self.dyads is None else self.table(self.dyads),
            columns=self.columns,
            directed=directed,
            unit=unit,
            period=period,
            provenance=self.provenance,
            names=names,
        )


AIR_SOURCE = (
    "U.S. Bureau of Transportation Statistics, flights of 2008 by route; Data.gov, airports; American Community "
    "Survey, populations"
)
PUBLIC_DOMAIN = "public domain (works of the United States government)"

ISLANDS = DataSet(
    name="islands",
    summary="freight between invented island ports, four years, made by a seeded generator with known truth",
    provenance=Provenance(
        source="invented: made by steelyard.datasets.islands, whose true coefficients are in ISLANDS_TRUTH",
        licence="public domain (invented)",
        amount="tonnes",
    ),
    package=PACKAGE,
    flows="demo_data/islands_flows.csv",
    nodes="demo_data/islands_ports.csv",
    dyads="demo_data/islands_routes.csv",
    columns=Columns("origin", "destination", "tonnes", "port", "year"),
    periods=("2029", "2030", "2031", "2032"),
    described=(
        ("throughput", "node: thousand tonnes handled in a year"),
        ("latitude", "node: degrees north"),
        ("longitude", "node: degrees east"),
        ("language", "node: main language of the port"),
        ("archipelago", "node: group of islands"),
        ("sea_distance", "dyad: kilometres by sea"),
    ),
)
STATE_AIR = DataSet(
    name="state-air-2008",
    summary="flights between 49 states of the United States in 2008, flights within a state dropped",
    provenance=Provenance(AIR_SOURCE, PUBLIC_DOMAIN, "flights", ("routes between airports summed by state",)),
    package=PACKAGE,
    flows="open_data/state_air_flows_2008.csv",
    nodes="open_data/states.csv",
    dyads="open_data/state_air_flows_2008.csv",
    columns=Columns("origin", "destination", "flow", "state"),
    periods=(),
    described=(
        ("population", "node: inhabitants of the state"),
        ("latitude", "node: degrees north, airports' mean weighted by departures plus arrivals"),
        ("longitude", "node: degrees east, likewise"),
        ("distance", "dyad: great-circle kilometres between those points"),
        ("origin_population", "dyad: inhabitants of the origin"),
        ("destination_population", "dyad: inhabitants of the destination"),
    ),
)
AIR_ROUTES = DataSet(
    name="air-routes-2008",
    summary="flights between 305 airports of the United States in 2008",
    provenance=Provenance(AIR_SOURCE, PUBLIC_DOMAIN, "flights"),
    package=PACKAGE,
    flows="open_data/air_routes_2008.csv",
    nodes="open_data/airports.csv",
    dyads=None,
    columns=Columns("origin", "destination", "count", "iata"),
    periods=(),
    described=(
        ("city", "node: city served"),
        ("state", "node: two letters; NA is a label of the source, not a gap"),
        ("latitude", "node: degrees north"),
        ("longitude", "node: degrees east"),
    ),
)


def dataset_registry() -> Registry[DataSet]:
    """Built-in data sets and those that installed packages offer under `steelyard.datasets`."""
    entries = {
        data.name: Entry("built in", partial(_itself, data)) for data in (ISLANDS, STATE_AIR, AIR_ROUTES)
    }
    registry: Registry[DataSet] = Registry("data set", _checked, entries)
    return registry.with_entry_points("steelyard.datasets")


def _itself(data: DataSet) -> DataSet:
    return data


def _checked(name: str, candidate: object) -> DataSet:
    if not isinstance(candidate, DataSet):
        raise RegistrationError(
            f"a data set must be a steelyard.datasets.DataSet; got {type(candidate).__name__}"
        )
    if candidate.name != name:
        raise RegistrationError(f"the data set calls itself '{candidate.name}' but is registered as '{name}'")
    return candidate
