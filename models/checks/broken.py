"""How a check says that a model breaks the contract."""

from __future__ import annotations

__all__ = ["ContractError", "require"]


class ContractError(AssertionError):
    """A model does not do what it declares; the text says which promise is broken and how."""


def require(kept: object, promise: str) -> None:
    """Raise ContractError unless the promise is kept; unlike `assert`, also under `python -O`."""
    if not kept:
        raise ContractError(promise)
