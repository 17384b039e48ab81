"""Where flows come from and what was done to them: printed in every report."""

from __future__ import annotations

from dataclasses import dataclass, replace

__all__ = ["Provenance"]


@dataclass(frozen=True)
class Provenance:
    """Source of a flow network and the steps between that source and the numbers that are modelled.

    Attributes
    ----------
    source : who made the data, in words
    licence : terms of use, in words
    amount : what one unit of flow is ("flights", "tonnes", ...)
    steps : what was done since, in order ("period 2031 selected", "directions summed", ...)
    """

    source: str
    licence: str = "not stated"
    amount: str = "not stated"
    steps: tuple[str, ...] = ()

    def after(self, step: str) -> Provenance:
        """The same source with one more step."""
        return replace(self, steps=(*self.steps, step))
