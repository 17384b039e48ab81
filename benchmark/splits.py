"""Cross-validation folds over dyads: typed, deterministic, both directions of a pair always together."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from steelyard.datasets import Bools, Dyads, Integers
from steelyard.models import Holdout

__all__ = ["DyadFolds", "Fold"]


@dataclass(frozen=True)
class Fold:
    """One training/test division: which scheme, repeat and fold (both counted from 1)."""

    scheme: DyadFolds
    repeat: int
    fold: int

    @property
    def holdout(self) -> Holdout:
        """What a model must be able to be scored on."""
        return self.scheme.holdout

    def divide(self, dyads: Dyads) -> tuple[Dyads, Dyads]:
        """Training and test dyads."""
        test = self.scheme.assignment(dyads, self.repeat) == self.fold
        return dyads.select(~test), dyads.select(test)


@dataclass(frozen=True)
class DyadFolds:
    """Random folds of dyads, stratified by links (edge sampling: Li, Levina & Zhu 2020).

    Pairs are dealt, not dyads: i -> j and j -> i share a fold, since one tells much about the other. Pairs
    with two, one and no links are dealt separately, so that every fold has its share of links.

    Parameters
    ----------
    folds : how many, at least 2
    repeats : how many independent divisions, at least 1
    seed : of the divisions; the same seed gives the same folds on every machine
    """

    folds: int
    repeats: int
    seed: int

    name = "dyads"
    holdout = Holdout.DYADS

    def __iter__(self) -> Iterator[Fold]:
        for repeat in range(1, self.repeats + 1):
            for fold in range(1, self.folds + 1):
                yield Fold(self, repeat, fold)

    def assignment(self, dyads: Dyads, repeat: int) -> Integers:
        """(N, N) fold of each dyad, from 1; symmetric; 0 where the dyad is not in the view."""
        n = dyads.n_nodes
        links: Bools = np.zeros((n, n), dtype=bool)
        known: Bools = np.zeros((n, n), dtype=bool)
        links[dyads.origin, dyads.destination] = dyads.links
        known[dyads.origin, dyads.destination] = True
        rows, columns = np.nonzero(np.triu(known | known.T, 1))
        stratum = links[rows, columns].astype(int) + links[columns, rows]
        rng = np.random.default_rng([self.seed, repeat])
        fold = np.empty(len(rows), dtype=np.int64)
        first = 0
        for level in range(3):
            members = rng.permutation(np.flatnonzero(stratum == level))
            # Each stratum starts where the last one stopped, which keeps fold sizes within one pair.
            fold[members] = (first + np.arange(len(members))) % self.folds + 1
            first += len(members)
        assigned = np.zeros((n, n), dtype=np.int64)
        assigned[rows, columns] = assigned[columns, rows] = fold
        return assigned
