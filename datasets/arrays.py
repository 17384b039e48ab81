"""Names for the array types that every package uses."""

from __future__ import annotations

from typing import Any, TypeAlias, TypeVar

import numpy as np
from numpy.typing import NDArray

__all__ = ["Bools", "Floats", "Integers", "read_only"]

Floats: TypeAlias = NDArray[np.float64]
Integers: TypeAlias = NDArray[np.int64]
Bools: TypeAlias = NDArray[np.bool_]
AnyArray = TypeVar("AnyArray", bound=NDArray[Any])


def read_only(values: AnyArray, /) -> AnyArray:
    """A view of the same numbers through which nobody can change them; nothing is copied."""
    view = values.view()
    view.flags.writeable = False
    return view
