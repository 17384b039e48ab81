"""What the rows of an index say of terms that the data do not move."""

from __future__ import annotations

import numpy as np

from steelyard.models.estimates import EstimatePart, Status
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Logit
from steelyard.models.linear_index import index_estimates


def test_where_every_dyad_is_at_its_limit_no_term_is_free() -> None:
    """All links: the constant is infinite, and of the covariate the data say nothing."""
    x = np.arange(12.0)
    found = fit_indices(Logit(np.ones(12)), [np.column_stack([np.ones(12), x])])
    rows = index_estimates(found, ("x",), EstimatePart.LINKS)
    assert rows.row("constant").status is Status.BOUNDARY
    assert rows.row("constant").value == np.inf
    assert rows.row("x").status is Status.FIXED
    assert "none is left" in rows.row("x").note
