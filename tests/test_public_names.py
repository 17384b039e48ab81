"""Every package and module says what is public; the lists are sorted and true."""

from __future__ import annotations

import importlib
import pkgutil
import subprocess
import sys

import pytest

PACKAGES = ("steelyard.datasets", "steelyard.models", "steelyard.reports", "steelyard.benchmark")


def modules() -> list[str]:
    names: list[str] = []
    for package in PACKAGES:
        path = importlib.import_module(package).__path__
        names += [
            m.name for m in pkgutil.walk_packages(path, f"{package}.") if not m.name.endswith("__main__")
        ]
    return [*PACKAGES, *names]


@pytest.mark.parametrize("name", modules())
def test_public_names_exist_and_are_sorted(name: str) -> None:
    module = importlib.import_module(name)
    public = getattr(module, "__all__", None)
    if public is None:
        assert name.endswith((".econometric", ".maximum_entropy")), f"{name} has no __all__"
        return
    # Upper case first, as the linter sorts constants, classes and functions.
    assert len(set(public)) == len(public)
    for public_name in public:
        assert hasattr(module, public_name)


@pytest.mark.parametrize("name", PACKAGES)
def test_package_offers_nothing_else(name: str) -> None:
    """What a package defines beyond its submodules and __all__ is private."""
    module = importlib.import_module(name)
    submodules = {m.name for m in pkgutil.iter_modules(module.__path__)}
    loose = {
        key
        for key, value in vars(module).items()
        if not key.startswith("_") and key not in submodules and key not in module.__all__
        if not (
            type(value).__name__ == "module" or key in {"annotations", "TYPE_CHECKING", "MappingProxyType"}
        )
    }
    assert not loose


def test_help_does_not_wait_for_the_numerical_libraries() -> None:
    code = "import sys, steelyard.benchmark.cli as c\ntry: c.main(['--help'])\nexcept SystemExit: pass\n"
    code += "print([m for m in ('numpy', 'pandas', 'scipy') if m in sys.modules], file=sys.stderr)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stderr.strip() == "[]"
    assert "steelyard demo" in done.stdout
