"""Information criteria: pure functions of evidence, which refuse to rank unlike footings together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from enum import Enum
from math import exp, inf, log

from steelyard.benchmark.errors import FootingError
from steelyard.benchmark.footing import Footing

__all__ = ["Criterion", "Evidence", "Ranked", "criterion_value", "ranking"]


class Criterion(Enum):
    """Minus twice the log-likelihood plus a price for parameters; smaller is better."""

    AIC = "aic"
    AICC = "aicc"
    BIC = "bic"
    HQIC = "hqic"


@dataclass(frozen=True)
class Evidence:
    """All that a criterion may know of a candidate.

    Attributes
    ----------
    candidate : its label
    log_likelihood : on the footing
    n_parameters : identified parameters of all parts, dispersion included
    n_dyads : how many dyads the log-likelihood sums over
    footing : where it stands
    """

    candidate: str
    log_likelihood: float
    n_parameters: int
    n_dyads: int
    footing: Footing


@dataclass(frozen=True)
class Ranked:
    """One row of a ranking: rank 1 is the smallest value; `weight` is the Akaike weight of that criterion."""

    candidate: str
    criterion: Criterion
    value: float
    delta: float
    weight: float
    rank: int


def criterion_value(criterion: Criterion, evidence: Evidence) -> float:
    """One criterion of one candidate.

    Returns
    -------
    float; inf where the log-likelihood is minus infinity, or where AICc has too few dyads to exist

    References
    ----------
    .. [1] Akaike (1974): AIC. Hurvich & Tsai (1989): AICc. Schwarz (1978): BIC. Hannan & Quinn (1979): HQIC.
    .. [2] Burnham & Anderson (2002).
    """
    k, n = evidence.n_parameters, evidence.n_dyads
    fit = -2.0 * evidence.log_likelihood
    if criterion is Criterion.AIC:
        return fit + 2.0 * k
    if criterion is Criterion.AICC:
        return fit + 2.0 * k * n / (n - k - 1) if n - k - 1 > 0 else inf
    if criterion is Criterion.BIC:
        return fit + k * log(n)
    return fit + 2.0 * k * log(log(n)) if n > 2 else inf


def ranking(criterion: Criterion, entries: Sequence[Evidence]) -> tuple[Ranked, ...]:
    """Rank candidates that stand on one footing, best first; ties share the better rank.

    Raises
    ------
    FootingError : two entries stand on different footings
    """
    _refuse_unlike(entries)
    valued = sorted(((criterion_value(criterion, e), i) for i, e in enumerate(entries)))
    if not valued:
        return ()
    best = valued[0][0]
    # With no finite value there is nothing to take differences from.
    deltas = [value - best if best < inf else inf for value, _ in valued]
    shares = [exp(-delta / 2.0) for delta in deltas]
    total = sum(shares)
    rows = []
    for (value, position), delta, share in zip(valued, deltas, shares, strict=True):
        rank = 1 + sum(1 for other, _ in valued if other < value)
        weight = share / total if total > 0 else float("nan")
        rows.append(Ranked(entries[position].candidate, criterion, value, delta, weight, rank))
    return tuple(rows)


def _refuse_unlike(entries: Sequence[Evidence]) -> None:
    for entry in entries[1:]:
        first = entries[0]
        if entry.footing != first.footing:
            raise FootingError(
                f"'{first.candidate}' stands on [{first.footing.text}] and '{entry.candidate}' on "
                f"[{entry.footing.text}]: their log-likelihoods are of different things, so no criterion ranks "
                "them together; compare each footing by itself, put amounts on the counts footing through cells, "
                "or compare scores that both footings share (links, expected flows)"
            )
