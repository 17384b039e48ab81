"""Three covariances of the same estimates: model, robust, and clustered on shared nodes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from scipy.linalg import eigh

from steelyard.datasets.arrays import Floats, Integers
from steelyard.models.estimates import ErrorKind

__all__ = ["Covariances", "NodePairs", "covariances", "node_clustered_meat"]


@dataclass(frozen=True, eq=False)
class NodePairs:
    """Ends of each observation, as node positions below `n_nodes`."""

    origin: Integers
    destination: Integers
    n_nodes: int


@dataclass(frozen=True, eq=False)
class Covariances:
    """(k, k) covariances by kind; `repaired` names the kinds that were not positive semidefinite."""

    by_kind: Mapping[ErrorKind, Floats]
    repaired: frozenset[ErrorKind]

    def standard_errors(self, kind: ErrorKind) -> Floats:
        """(k,) square roots of the diagonal."""
        return np.asarray(np.sqrt(np.maximum(np.diag(self.by_kind[kind]), 0.0)))


def covariances(
    information: Floats, scores: Floats, pairs: NodePairs | None, n_parameters: int | None = None
) -> Covariances:
    """All kinds that the observations allow.

    Parameters
    ----------
    information : (k, k) observed information, positive definite
    scores : (n, k) gradient of each observation's log-likelihood
    pairs : the nodes of each observation; None leaves out the node-clustered kind
    n_parameters : what the factor of the robust kind counts, where parameters besides these k were estimated

    References
    ----------
    .. [1] MacKinnon & White (1985): HC1, the sandwich times n / (n - k).
    .. [2] Fafchamps & Gubert (2007); Aronow, Samii & Assenova (2015): dyads that share a node.
    """
    n = len(scores)
    k = scores.shape[1] if n_parameters is None else n_parameters
    bread = np.linalg.inv(information)
    bread = (bread + bread.T) / 2
    factor = n / (n - k) if n > k else np.nan
    kinds = {ErrorKind.MODEL: bread, ErrorKind.ROBUST: factor * bread @ (scores.T @ scores) @ bread}
    repaired: set[ErrorKind] = set()
    if pairs is not None:
        clustered = bread @ node_clustered_meat(scores, pairs) @ bread
        kinds[ErrorKind.NODE_CLUSTERED], mended = _semidefinite(clustered, bread)
        if mended:
            repaired.add(ErrorKind.NODE_CLUSTERED)
    return Covariances(kinds, frozenset(repaired))


def node_clustered_meat(scores: Floats, pairs: NodePairs) -> Floats:
    """(k, k) sum of s_d s_e' over all ordered pairs of observations d, e that share a node (d = e included).

    Worked out from node sums: sum_i S_i S_i' counts two dyads of one pair twice, so the sum of R R' over
    unordered pairs is taken off, where S_i is the score total of all dyads that touch i and R that of a pair.
    """
    low = np.minimum(pairs.origin, pairs.destination)
    high = np.maximum(pairs.origin, pairs.destination)
    pair, n_pairs = low * pairs.n_nodes + high, pairs.n_nodes**2
    if n_pairs > 8 * len(pair):
        # Too few of the pairs are there to keep a place for each.
        key, pair = np.unique(pair, return_inverse=True)
        n_pairs = len(key)
    node, both = (np.empty((size, scores.shape[1])) for size in (pairs.n_nodes, n_pairs))
    for column in range(scores.shape[1]):
        values = scores[:, column]
        out = np.bincount(pairs.origin, weights=values, minlength=pairs.n_nodes)
        node[:, column] = out + np.bincount(pairs.destination, weights=values, minlength=pairs.n_nodes)
        both[:, column] = np.bincount(pair, weights=values, minlength=n_pairs)
    return np.asarray(node.T @ node - both.T @ both)


def _semidefinite(matrix: Floats, unit: Floats) -> tuple[Floats, bool]:
    """The nearest positive semidefinite matrix by clipping eigenvalues, in units of the model covariance.

    Scaling first keeps one large coefficient from hiding the others.
    """
    root = np.sqrt(np.diag(unit))
    values, vectors = eigh((matrix + matrix.T) / 2 / np.outer(root, root))
    if np.abs(values).max() <= 1e-12:
        # Rounding only: with three nodes every two dyads share one, so the scores add up to zero.
        return np.zeros_like(matrix), False
    if values[0] >= -1e-12 * max(1.0, float(values[-1])):
        return (matrix + matrix.T) / 2, False
    clipped = (vectors * np.maximum(values, 0.0)) @ vectors.T
    return clipped * np.outer(root, root), True
