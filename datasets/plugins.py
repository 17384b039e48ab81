"""Registries as values: a literal table of built-ins plus lazily loaded entry points.

Nothing is imported until it is asked for, adding returns a new registry, a name is taken once, and a plugin
that cannot be loaded is isolated: it is reported, and everything else goes on.
"""

from __future__ import annotations

import importlib
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import partial
from importlib.metadata import EntryPoint, entry_points
from types import MappingProxyType
from typing import Generic, TypeVar

from steelyard.datasets.errors import RegistrationError, UnknownNameError

__all__ = ["BrokenPlugin", "Entry", "Registry", "built_in_entries"]

T = TypeVar("T")
NAME = re.compile(r"[a-z][a-z0-9]*([_-][a-z0-9]+)*")


@dataclass(frozen=True)
class Entry:
    """Where one registered thing comes from.

    Attributes
    ----------
    provider : "built in", or the distribution that offers it
    load : imports and returns the object; may raise anything, since it runs a stranger's code
    """

    provider: str
    load: Callable[[], object]


@dataclass(frozen=True)
class BrokenPlugin:
    """A plugin that could not be used, and why."""

    name: str
    provider: str
    reason: str


def built_in_entries(table: Mapping[str, str]) -> dict[str, Entry]:
    """Entries for a literal table of name -> "module:attribute"; no module is imported here."""
    return {name: Entry("built in", partial(_import, target)) for name, target in table.items()}


def _import(target: str) -> object:
    module, _, attribute = target.partition(":")
    return getattr(importlib.import_module(module), attribute)


@dataclass(frozen=True)
class Registry(Generic[T]):
    """Named things of one kind.

    Attributes
    ----------
    kind : what the things are, for messages ("model", "data set", "score", ...)
    check : turns a loaded object into a T, or raises RegistrationError saying which rule it breaks
    entries : name -> where it comes from
    refused : plugins whose name is malformed or already taken
    """

    kind: str
    check: Callable[[str, object], T]
    entries: Mapping[str, Entry]
    refused: tuple[BrokenPlugin, ...] = ()

    def __post_init__(self) -> None:
        for name, entry in self.entries.items():
            if not NAME.fullmatch(name):
                raise RegistrationError(
                    f"the {self.kind} name '{name}' of {entry.provider} must be lower-case words joined by _ or -"
                )
        object.__setattr__(self, "entries", MappingProxyType(dict(self.entries)))

    @property
    def names(self) -> tuple[str, ...]:
        """Every registered name, sorted; nothing is loaded."""
        return tuple(sorted(self.entries))

    def get(self, name: str, *, where: str = "") -> T:
        """The thing registered under `name`.

        Raises
        ------
        UnknownNameError : nobody registered the name; the nearest ones are in the text
        RegistrationError : the plugin behind the name cannot be loaded or breaks the rules
        """
        if name not in self.entries:
            raise UnknownNameError(self.kind, name, self.entries, where=where)
        entry = self.entries[name]
        try:
            return self.check(name, entry.load())
        except (Exception, SystemExit) as error:  # a stranger's module may even try to end the program
            raise RegistrationError(
                f"the {self.kind} '{name}' of {entry.provider} cannot be used: {_one_line(error)}"
            ) from error

    def load_all(self) -> tuple[dict[str, T], tuple[BrokenPlugin, ...]]:
        """Everything that loads, by name, and everything that does not, with its reason."""
        loaded: dict[str, T] = {}
        broken = list(self.refused)
        for name in self.names:
            try:
                loaded[name] = self.get(name)
            except RegistrationError as error:
                broken.append(BrokenPlugin(name, self.entries[name].provider, str(error)))
        return loaded, tuple(broken)

    def adding(self, name: str, entry: Entry) -> Registry[T]:
        """A new registry that also holds `entry`.

        Raises
        ------
        RegistrationError : the name is malformed or taken
        """
        if name in self.entries:
            raise RegistrationError(
                f"the {self.kind} name '{name}' of {entry.provider} is already taken by "
                f"{self.entries[name].provider}; rename the plugin's entry point"
            )
        return replace(self, entries={**self.entries, name: entry})

    def with_entry_points(self, group: str) -> Registry[T]:
        """A new registry that also offers what installed packages declare under `group`.

        A plugin with a bad or taken name goes to `refused`; the others are not disturbed.
        """
        registry: Registry[T] = self
        found = sorted(entry_points(group=group), key=lambda point: (_provider(point), point.name))
        for point in found:
            try:
                registry = registry.adding(point.name, Entry(_provider(point), point.load))
            except RegistrationError as error:
                broken = BrokenPlugin(point.name, _provider(point), str(error))
                registry = replace(registry, refused=(*registry.refused, broken))
        return registry


def _provider(point: EntryPoint) -> str:
    try:
        name = None if point.dist is None else point.dist.name
    except (
        AttributeError,
        KeyError,
        OSError,
        TypeError,
    ):  # half-removed packages; it differs between Pythons
        name = None
    return f"the package {name}" if name else "an unnamed package"


def _one_line(error: BaseException) -> str:
    text = " ".join(str(error).split()) or "no reason given"
    return text if isinstance(error, RegistrationError) else f"{type(error).__name__}: {text}"
