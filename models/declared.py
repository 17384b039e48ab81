"""Declarations that depend on a model's options."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, Generic, TypeVar

__all__ = ["Declared"]

T = TypeVar("T")


class Declared(Generic[T]):
    """A class attribute of a model that its options may change.

    The registered class shows the declaration of the default options, a model with options shows its own, so
    that the registry and the harness read one attribute.

    Parameters
    ----------
    default : what the class declares
    chosen : model -> what that model declares
    """

    def __init__(self, default: T, chosen: Callable[[Any], T]) -> None:
        self._default = default
        self._chosen = chosen

    def __get__(self, model: object | None, owner: type | None = None) -> T:
        return self._default if model is None else self._chosen(model)
