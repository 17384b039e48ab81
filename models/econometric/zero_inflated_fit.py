"""Fits of zero-inflated counts, with the limits that their likelihood may rise to."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from steelyard.datasets.arrays import Floats
from steelyard.models.contract import Convergence
from steelyard.models.count_laws import DispersionForm, NegativeBinomialLaw, PoissonLaw
from steelyard.models.covariance import NodePairs
from steelyard.models.econometric.inflation_limits import FAR, gain_of_certain_zeros, limit_direction
from steelyard.models.econometric.negative_binomial import fit_negative_binomial
from steelyard.models.estimates import Estimate, EstimatePart, Estimates, Status
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.likelihoods import Poisson
from steelyard.models.linear_index import CONSTANT, LinearIndex, index_estimates, scale_estimate
from steelyard.models.separation import MOVES
from steelyard.models.zero_inflated_law import ZeroInflatedLaw
from steelyard.models.zero_inflated_likelihood import ZeroInflated

__all__ = [
    "ZeroInflatedFit",
    "dispersion_estimate",
    "fit_zero_inflated",
    "inflation_index",
    "part_estimates",
]

MOST_LIMITS = 4
SMALL_ALPHA = 0.02
# A gain in log-likelihood that puts a maximum in doubt.
MATTERS = 1e-6


@dataclass(frozen=True, eq=False)
class ZeroInflatedFit:
    """A fitted zero-inflated likelihood.

    Attributes
    ----------
    found : indices are log mean, log odds of inflation and, if dispersed, log alpha; where nothing is inflated the
        plain count fit, without the second index; where alpha is at its edge 0, without the third
    inflated : whether there is inflation at all
    directions : (k,) directions of the inflation coefficients along which the log odds run to their limits
    log_likelihood : at the fit, constants included
    dispersed : whether negative binomial counts were asked for
    """

    found: IndexFit
    inflated: bool
    directions: tuple[Floats, ...]
    log_likelihood: float

    dispersed: bool

    @property
    def alpha(self) -> float:
        """The dispersion, 0 where it is at its edge or the counts are Poisson."""
        expected = 3 if self.inflated else 2
        found = self.found.coefficients
        return float(np.exp(found[-1][0])) if len(found) == expected else 0.0

    @property
    def convergence(self) -> Convergence:
        """The certificate, which also says what is at an edge."""
        said = [self.found.convergence.message]
        said += [] if self.inflated else ["nothing is inflated: the maximum is the plain count law"]
        said += ["alpha at its edge 0"] if self.dispersed and not self.alpha else []
        return replace(self.found.convergence, message="; ".join(m for m in said if m))


def fit_zero_inflated(
    response: Floats, designs: Sequence[Floats], pairs: NodePairs | None = None, *, dispersed: bool
) -> ZeroInflatedFit:
    """Maximise over all parameters jointly.

    Parameters
    ----------
    response : (n,) counts
    designs : (n, k) columns of the log mean and of the log odds of inflation, each with the constant first
    pairs : nodes of each observation, for node-clustered covariance
    dispersed : negative binomial counts rather than Poisson

    Returns
    -------
    ZeroInflatedFit, never below the laws it contains: the plain count law (nothing inflated) and, if dispersed, the
    zero-inflated Poisson (alpha at its edge). Observations whose log odds run to a limit are fixed there.

    Raises
    ------
    ModelError : too few observations
    """
    if not (response == 0).any() or not (response > 0).any():
        return _plain(response, designs[0], pairs, dispersed=dispersed, errors=True)
    best = _with_limits(response, designs, pairs, dispersed=dispersed)
    if dispersed and (best.alpha < SMALL_ALPHA or not best.found.convergence.converged):
        best = _better(best, _with_limits(response, designs, pairs, dispersed=False))
    plain = _plain(response, designs[0], pairs, dispersed=dispersed, errors=False)
    if _better(best, plain) is plain:
        best = _plain(response, designs[0], pairs, dispersed=dispersed, errors=True)
        best = _doubted(best, response, designs)
    return replace(best, dispersed=dispersed)


def _doubted(plain: ZeroInflatedFit, response: Floats, designs: Sequence[Floats]) -> ZeroInflatedFit:
    """The plain law as the maximum, unless making a few zeros certain is plainly better: then it is not one."""
    law = _law(np.full(len(response), -np.inf), _index(plain.found, designs[0]), plain.alpha)
    n_certain, gain = gain_of_certain_zeros(designs[1], law.log_density(np.zeros(len(response))), response)
    if gain <= MATTERS:
        return plain
    said = (
        f"no maximum was found: inflation of all dyads falls to nothing, and yet the likelihood gains {gain:.2g} in a "
        f"limit that makes {n_certain} zeros certain and inflates no other dyad; use fewer inflation covariates"
    )
    convergence = replace(plain.found.convergence, converged=False, message=said)
    return replace(plain, found=replace(plain.found, convergence=convergence, covariances={}))


def _better(best: ZeroInflatedFit, rival: ZeroInflatedFit) -> ZeroInflatedFit:
    """The rival, a law that lies inside the other, where it is certified and the other gains nothing on it.

    A search that ended without a certificate on its way to the rival is still a little below it.
    """
    slack = 1e-13 if best.found.convergence.converged else 1e-7
    as_good = rival.log_likelihood > best.log_likelihood - slack * (1.0 + abs(best.log_likelihood))
    return rival if rival.found.convergence.converged and as_good else best


def _plain(
    response: Floats, design: Floats, pairs: NodePairs | None, *, dispersed: bool, errors: bool
) -> ZeroInflatedFit:
    """The count law without inflation."""
    found = (
        fit_negative_binomial(response, design, pairs, errors=errors)
        if dispersed
        else fit_indices(Poisson(response), [design], pairs, errors=errors)
    )
    alpha = float(np.exp(found.coefficients[1][0])) if len(found.coefficients) > 1 else 0.0
    law = _law(np.full(len(response), -np.inf), _index(found, design), alpha)
    return ZeroInflatedFit(found, False, (), float(law.log_density(response).sum()), dispersed)


def _with_limits(
    response: Floats, designs: Sequence[Floats], pairs: NodePairs | None, *, dispersed: bool
) -> ZeroInflatedFit:
    """Fit; where log odds run off, fix those observations at their limits and fit what is left."""
    n = len(response)
    directions: list[Floats] = []
    odds = np.zeros(n)  # plus or minus infinity once it is fixed
    while True:
        certain = odds == np.inf
        never = odds == -np.inf
        kept = ~certain
        inflation = np.where(never[:, None], 0.0, designs[1])[kept]
        columns = [designs[0][kept], inflation]
        likelihood = ZeroInflated(response[kept], never[kept], dispersed)
        some = (
            None if pairs is None else NodePairs(pairs.origin[kept], pairs.destination[kept], pairs.n_nodes)
        )
        found = fit_indices(likelihood, columns + [np.ones((int(kept.sum()), 1))] * dispersed, some)
        free = odds == 0.0
        index = designs[1] @ found.coefficients[1]
        limit = None
        if not found.convergence.converged and len(directions) < MOST_LIMITS:
            limit = limit_direction(designs[1], index, free, response)
        if limit is None:
            return _finished(response, designs, found, directions, odds, dispersed=dispersed)
        move = designs[1] @ limit
        tolerance = MOVES + 1e-14 * (np.abs(designs[1]) @ np.abs(limit))
        moved = free & (np.abs(move) > tolerance)
        odds[moved] = np.copysign(np.inf, move[moved])
        directions.append(limit)


def _finished(
    response: Floats,
    designs: Sequence[Floats],
    found: IndexFit,
    directions: Sequence[Floats],
    fixed: Floats,
    *,
    dispersed: bool,
) -> ZeroInflatedFit:
    """The fit with its likelihood on all observations, and a message that counts what was fixed."""
    separated = np.zeros(len(response), dtype=bool)
    separated[fixed != np.inf] = found.separated
    odds = np.where(fixed == 0.0, designs[1] @ found.coefficients[1], fixed)
    index = designs[0] @ found.coefficients[0]
    index[separated] = -np.inf
    alpha = float(np.exp(found.coefficients[2][0])) if dispersed else 0.0
    law = _law(odds, index, alpha)
    found = _with_runaway_named(found, designs[1], fixed)
    if directions:
        at_limit = int((fixed != 0.0).sum())
        said = f"inflation of {at_limit} dyads fixed at its limit ({int((fixed > 0).sum())} always zero)"
        message = "; ".join(m for m in (found.convergence.message, said) if m)
        found = replace(found, convergence=replace(found.convergence, message=message))
    total = float(law.log_density(response).sum())
    return ZeroInflatedFit(found, True, tuple(directions), total, dispersed)


def _with_runaway_named(found: IndexFit, design: Floats, fixed: Floats) -> IndexFit:
    """The same, the message of an uncertified search saying where its log odds have gone."""
    convergence = found.convergence
    if convergence.converged or not found.rank:
        return found
    index = (design @ found.coefficients[1])[fixed == 0.0]
    up, down = int((index > FAR).sum()), int((index < -FAR).sum())
    if not up + down:
        return found
    said = (
        f"the log odds of inflation ran off on {up + down} dyads ({up} of them to always zero) in a way that other "
        "dyads pay for; there may be several such limits and no maximum: use fewer inflation covariates"
    )
    return replace(found, convergence=replace(convergence, message=f"{convergence.message}; {said}"))


def _index(found: IndexFit, design: Floats) -> Floats:
    """(n,) log means, minus infinity on separated observations."""
    index = design @ found.coefficients[0]
    index[found.separated] = -np.inf
    return index


def _law(odds: Floats, index: Floats, alpha: float) -> ZeroInflatedLaw:
    with np.errstate(over="ignore"):
        mean = np.minimum(np.exp(index), 1e300)
    if not 0.0 < alpha < np.inf:
        return ZeroInflatedLaw(odds, PoissonLaw(mean))
    return ZeroInflatedLaw(odds, NegativeBinomialLaw(mean, alpha, DispersionForm.QUADRATIC))


def inflation_index(fit: ZeroInflatedFit, inflation: Sequence[str]) -> LinearIndex:
    """The log odds of being zero in any case: minus infinity everywhere where nothing is inflated."""
    if fit.inflated:
        return LinearIndex.from_coefficients(fit.found.coefficients[1], inflation, fit.directions)
    down = np.zeros(1 + len(inflation))
    down[0] = -1.0
    return LinearIndex.from_coefficients(np.zeros(1 + len(inflation)), inflation, [down])


def part_estimates(fit: ZeroInflatedFit, covariates: Sequence[str], inflation: Sequence[str]) -> Estimates:
    """Rows of the count part and of the inflation part."""
    counts = index_estimates(fit.found, covariates, EstimatePart.JOINT)
    if fit.inflated:
        return counts + index_estimates(fit.found, inflation, EstimatePart.INFLATION, 1, fit.directions)
    said = "nothing is inflated: the maximum is the plain count law"
    part, boundary, fixed = EstimatePart.INFLATION, Status.BOUNDARY, Status.FIXED
    rows = [Estimate(part, CONSTANT, -np.inf, {}, boundary, note=said)]
    rows += [Estimate(part, name, 0.0, {}, fixed, note=said) for name in inflation]
    return counts + Estimates(tuple(rows))


def dispersion_estimate(fit: ZeroInflatedFit) -> Estimate:
    """The row of alpha."""
    if fit.alpha:
        return scale_estimate(fit.found, 2 if fit.inflated else 1, "alpha", EstimatePart.DISPERSION)
    note = "no overdispersion beyond the zeros: the maximum is a Poisson law of the counts"
    return Estimate(EstimatePart.DISPERSION, "alpha", 0.0, {}, Status.BOUNDARY, True, note)
