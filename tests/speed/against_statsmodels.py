"""How fast the count models fit, against plain statsmodels calls:  python tests/speed/against_statsmodels.py [N]

Both fit the same simulated dyads of N nodes (600: 359,400 dyads) one after the other in one run, and only ratios
within the run mean anything. Each is run three times and its least time counts (once, if that takes over ten
seconds). Ours is timed with all three kinds of standard errors, statsmodels with its default call. Log-likelihoods
stand beside the times: a fast fit that stops short is no fit.
"""

from __future__ import annotations

import argparse
import os
import time
import warnings
from collections.abc import Callable
from dataclasses import dataclass, replace

# One thread each, so that the ratio is one of work done.
os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np  # after the number of threads is set
import statsmodels.api as sm
from statsmodels.discrete.count_model import (
    ZeroInflatedNegativeBinomialP,
    ZeroInflatedPoisson,
)

from steelyard.datasets import Floats
from steelyard.models.covariance import NodePairs
from steelyard.models.distributions import DispersionForm, NegativeBinomialLaw, PoissonLaw
from steelyard.models.econometric.negative_binomial import fit_negative_binomial
from steelyard.models.econometric.zero_inflated_fit import fit_zero_inflated
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.likelihoods import Poisson

SEED = 4_471
RUNS, LONG = 3, 10.0
WANTED = {"negative binomial": 3, "zero-inflated Poisson": 5, "zero-inflated negative binomial": 10}


@dataclass(frozen=True)
class Timed:
    """Seconds and the log-likelihood that they bought."""

    seconds: float
    log_likelihood: float
    converged: bool


@dataclass(frozen=True, eq=False)
class Network:
    """Simulated dyads: a gravity mean with gamma dispersion, and zeros in any case by the same covariates."""

    pairs: NodePairs
    design: Floats
    mean: Floats
    inflated: Floats
    spread: Floats

    @classmethod
    def of(cls, n_nodes: int) -> Network:
        rng = np.random.default_rng(SEED)
        origin, destination = np.divmod(np.arange(n_nodes**2), n_nodes)
        off = origin != destination
        origin, destination = origin[off], destination[off]
        size, place = rng.lognormal(0.0, 1.0, n_nodes), rng.random((n_nodes, 2))
        distance = np.hypot(*(place[origin] - place[destination]).T)
        columns = [np.log(size[origin]), np.log(size[destination]), np.log(distance + 0.01)]
        design = np.column_stack([np.ones(len(origin)), *columns])
        mean = np.exp(design @ np.array([1.5, 0.8, 0.7, -0.5]))
        share = 1.0 / (1.0 + np.exp(-(design @ np.array([0.3, -0.5, -0.4, 0.5]))))
        inflated = (rng.random(len(origin)) < share).astype(float)
        spread = rng.standard_exponential(len(origin))
        return cls(NodePairs(origin, destination, n_nodes), design, mean, inflated, spread)

    def counts(self, *, dispersed: bool, zeros: bool) -> Floats:
        rng = np.random.default_rng(SEED + 1)
        counts = rng.poisson(self.mean * (self.spread if dispersed else 1.0)).astype(float)
        return np.where(self.inflated == 1, 0.0, counts) if zeros else counts


def timed(work: Callable[[], tuple[float, bool]]) -> Timed:
    """The least time of three runs, or that of one long one."""
    runs: list[Timed] = []
    while len(runs) < RUNS and (not runs or runs[0].seconds < LONG):
        start = time.perf_counter()
        log_likelihood, converged = work()
        runs.append(Timed(time.perf_counter() - start, log_likelihood, converged))
    return min(runs, key=lambda run: run.seconds)


def ours_plain(network: Network, counts: Floats, *, dispersed: bool) -> Timed:
    """A count law without inflation; its full log-likelihood is worked out off the clock."""
    fits: list[IndexFit] = []

    def work() -> tuple[float, bool]:
        if dispersed:
            fits.append(fit_negative_binomial(counts, network.design, network.pairs))
        else:
            fits.append(fit_indices(Poisson(counts), [network.design], network.pairs))
        return 0.0, fits[-1].convergence.converged

    best = timed(work)
    found = fits[-1]
    mean = np.exp(network.design @ found.coefficients[0])
    alpha = float(np.exp(found.coefficients[1][0])) if dispersed else 0.0
    law = NegativeBinomialLaw(mean, alpha, DispersionForm.QUADRATIC) if dispersed else PoissonLaw(mean)
    return replace(best, log_likelihood=float(law.log_density(counts).sum()))


def ours_inflated(network: Network, counts: Floats, *, dispersed: bool) -> Timed:
    def work() -> tuple[float, bool]:
        designs = [network.design, network.design]
        fit = fit_zero_inflated(counts, designs, network.pairs, dispersed=dispersed)
        return fit.log_likelihood, fit.convergence.converged

    return timed(work)


def outside(model: object) -> Timed:
    """The default call, which may stop unconverged after 35 steps."""

    def work() -> tuple[float, bool]:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # its remarks are in the column `converged`
            found = model.fit(disp=0)  # type: ignore[attr-defined]
        converged = getattr(found, "mle_retvals", {}).get("converged", True)
        return float(found.llf), bool(converged)

    return timed(work)


def main() -> int:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("nodes", type=int, nargs="?", default=600)
    network = Network.of(parser.parse_args().nodes)
    x = network.design
    print(f"{len(x):,} dyads, {x.shape[1]} columns in each index, one thread, numpy {np.__version__}\n")
    print(
        f"{'':33}{'ours':>9}{'outside':>9}{'ratio':>8}{'wanted':>8}{'log-likelihood, ours less outside':>36}"
    )
    missed = 0
    for name, dispersed, zeros in (
        ("Poisson", False, False),
        ("negative binomial", True, False),
        ("zero-inflated Poisson", False, True),
        ("zero-inflated negative binomial", True, True),
    ):
        y = network.counts(dispersed=dispersed, zeros=zeros)
        if zeros:
            ours = ours_inflated(network, y, dispersed=dispersed)
            kind = ZeroInflatedNegativeBinomialP if dispersed else ZeroInflatedPoisson
            theirs = outside(kind(y, x, exog_infl=x))
        else:
            ours = ours_plain(network, y, dispersed=dispersed)
            theirs = outside(sm.NegativeBinomial(y, x) if dispersed else sm.Poisson(y, x))
        ratio, wanted = theirs.seconds / ours.seconds, WANTED.get(name)
        gain = ours.log_likelihood - theirs.log_likelihood
        good = ours.converged and gain >= -1e-8 * abs(theirs.log_likelihood) and ratio >= (wanted or 0)
        missed += not good
        said = "" if theirs.converged else "  (outside: not converged)"
        print(
            f"{name:33}{ours.seconds:8.2f}s{theirs.seconds:8.2f}s{ratio:8.1f}{wanted or '':>8}{gain:36.6f}{said}"
            + ("" if good else "  MISSED")
        )
    return 1 if missed else 0


if __name__ == "__main__":
    raise SystemExit(main())
