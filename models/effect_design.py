"""Covariates with node effects taken out: scaled, and those that the effects already contain set aside."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from steelyard.datasets.arrays import Floats
from steelyard.models.design import ALIAS_LIMIT, scaled_design
from steelyard.models.effect_incidence import Incidence

__all__ = ["EffectDesign", "effect_design"]


@dataclass(frozen=True, eq=False)
class EffectDesign:
    """Effects and covariates of n dyads.

    Attributes
    ----------
    incidence : the effects
    matrix : (n, r) what is left of the covariates, of unit scale and full rank
    back : (k, r) so that slopes of the original columns = back @ slopes of `matrix`, 0 for columns set aside
    taken : (P, k) effects C with original columns - E C = what is left of them
    contained : positions of columns that the effects contain; further columns may be aliased with each other
    rounding : largest rounding of an entry of `matrix`, from columns that lie far from zero
    """

    incidence: Incidence
    matrix: Floats
    back: Floats
    taken: Floats
    contained: tuple[int, ...]
    rounding: float

    @property
    def rank(self) -> int:
        """Identified effects and slopes."""
        return self.incidence.rank + int(self.matrix.shape[1])

    @property
    def aliased(self) -> tuple[int, ...]:
        """Positions of the columns set aside, whether for the effects or for earlier columns."""
        return tuple(np.flatnonzero((self.back == 0).all(axis=1)).tolist())

    def original_effects(self, effects: Floats, slopes: Floats) -> Floats:
        """(P,) effects beside the original columns, from those beside `matrix`."""
        return np.asarray(effects - self.taken @ slopes)


def effect_design(columns: Floats, incidence: Incidence) -> EffectDesign:
    """Prepare (n, k) columns; the limits of what counts as contained are those of a design without effects."""
    n = len(columns)
    left, taken = incidence.without_effects(columns)
    spread = np.sqrt(((columns - columns.mean(axis=0)) ** 2).mean(axis=0))
    rounding = 4.0 * np.finfo(np.float64).eps * np.abs(columns).max(axis=0, initial=0.0)
    limit = np.maximum(ALIAS_LIMIT * spread, rounding)
    contained = np.sqrt((left**2).sum(axis=0) / n) <= limit
    left[:, contained] = 0.0
    scaled = scaled_design(left)
    return EffectDesign(
        incidence=incidence,
        matrix=scaled.matrix,
        back=scaled.back,
        taken=taken,
        contained=tuple(np.flatnonzero(contained).tolist()),
        rounding=float((rounding @ np.abs(scaled.back)).max(initial=0.0)),
    )
