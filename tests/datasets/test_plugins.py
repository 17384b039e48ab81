"""Registries: values that nobody can change, names that are taken once, strangers that cannot do harm."""

from __future__ import annotations

import importlib
import sys
from collections.abc import Callable
from dataclasses import FrozenInstanceError
from pathlib import Path

import pytest

from steelyard.datasets import (
    BrokenPlugin,
    Entry,
    RegistrationError,
    Registry,
    UnknownNameError,
    dataset_registry,
)
from steelyard.datasets.plugins import built_in_entries

GROUP = "steelyard.test_things"


def text_only(name: str, candidate: object) -> str:
    if not isinstance(candidate, str):
        raise RegistrationError(f"'{name}' must be a text; got {type(candidate).__name__}")
    return candidate


def entry(value: object, provider: str = "built in") -> Entry:
    return Entry(provider, lambda: value)


def registry(**values: object) -> Registry[str]:
    return Registry("thing", text_only, {name: entry(value) for name, value in values.items()})


Installer = Callable[..., None]


@pytest.fixture
def install(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Installer:
    """Puts a package with modules and entry points on the path, as pip would."""

    def installer(distribution: str, points: str, *, metadata: bool = True, **modules: str) -> None:
        folder = tmp_path / f"{distribution.replace('-', '_')}-1.0.dist-info"
        folder.mkdir()
        if metadata:
            text = f"Metadata-Version: 2.1\nName: {distribution}\nVersion: 1.0\n"
            (folder / "METADATA").write_text(text, encoding="utf-8")
        (folder / "entry_points.txt").write_text(points, encoding="utf-8")
        for module, source in modules.items():
            (tmp_path / f"{module}.py").write_text(source, encoding="utf-8")
            monkeypatch.delitem(sys.modules, module, raising=False)
        monkeypatch.syspath_prepend(str(tmp_path))
        importlib.invalidate_caches()

    return installer


# --- a value


def test_names_are_sorted_and_things_are_got_by_name() -> None:
    found = registry(b="two", a="one")
    assert found.names == ("a", "b")
    assert found.get("b") == "two"


def test_adding_returns_a_new_registry_and_leaves_the_old_one() -> None:
    old = registry(a="one")
    new = old.adding("b", entry("two", "the package extra"))
    assert (old.names, new.names) == (("a",), ("a", "b"))
    assert new.get("b") == "two"


def test_nobody_can_change_a_registry() -> None:
    table = {"a": entry("one")}
    found = Registry("thing", text_only, table)
    table["b"] = entry("two")
    assert found.names == ("a",)
    with pytest.raises(TypeError):
        found.entries["b"] = entry("two")  # type: ignore[index]  # that it cannot is the point
    with pytest.raises(FrozenInstanceError):
        found.kind = "other"  # type: ignore[misc]  # likewise


@pytest.mark.parametrize("name", ["a", "ab2", "two_words", "two-words", "x1-y2_z3"])
def test_good_names(name: str) -> None:
    assert registry().adding(name, entry("one")).names == (name,)


@pytest.mark.parametrize("name", ["", "A", "Two", "2b", "_a", "a_", "a__b", "a b", "a.b", "é", "a\n"])
def test_bad_names_are_refused_when_added_and_when_built_in(name: str) -> None:
    with pytest.raises(RegistrationError, match="of the package x must be lower-case words joined by _ or -"):
        registry().adding(name, entry("one", "the package x"))
    with pytest.raises(RegistrationError, match="of built in must be lower-case words"):
        registry(**{name: "one"})


def test_a_taken_name_is_refused_with_both_providers() -> None:
    with pytest.raises(RegistrationError, match="'a' of the package x is already taken by built in; rename"):
        registry(a="one").adding("a", entry("two", "the package x"))


def test_an_unknown_name_comes_with_the_nearest_and_the_place() -> None:
    with pytest.raises(
        UnknownNameError, match=r"no thing named 'poison' \(s.toml\); did you mean 'poisson'"
    ) as caught:
        registry(poisson="one", gamma="two").get("poison", where="s.toml")
    assert (caught.value.kind, caught.value.name, caught.value.nearest) == ("thing", "poison", ("poisson",))


# --- lazy


def test_a_built_in_module_is_imported_only_when_asked_for(install: Installer) -> None:
    install("lazy", "", steelyard_lazy="THING = 'made'\n")
    found = Registry("thing", text_only, built_in_entries({"lazy": "steelyard_lazy:THING"}))
    assert found.names == ("lazy",)
    assert "steelyard_lazy" not in sys.modules
    assert found.get("lazy") == "made"
    assert "steelyard_lazy" in sys.modules


def test_an_entry_point_is_found_and_imported_only_when_asked_for(install: Installer) -> None:
    points = f"[{GROUP}]\nharbour = steelyard_harbour:THING\n"
    install("harbour-things", points, steelyard_harbour="THING = 'quay'\n")
    found = registry(a="one").with_entry_points(GROUP)
    assert (found.names, found.refused) == (("a", "harbour"), ())
    assert found.entries["harbour"].provider == "the package harbour-things"
    assert "steelyard_harbour" not in sys.modules
    assert found.get("harbour") == "quay"
    assert "steelyard_harbour" in sys.modules
    assert registry(a="one").with_entry_points("steelyard.other_things").names == ("a",)


# --- strangers


@pytest.mark.parametrize(
    ("source", "target", "reason"),
    [
        ("raise ValueError('no harbour\\ntoday')", "THING", "ValueError: no harbour today"),
        ("import steelyard_not_there", "THING", "No module named 'steelyard_not_there'"),
        ("import sys\nsys.exit(3)", "THING", "SystemExit: 3"),
        ("OTHER = 1", "THING", "has no attribute 'THING'"),
        ("THING = 5", "THING", "'broken' must be a text; got int"),
        ("raise RuntimeError", "THING", "RuntimeError: no reason given"),
        ("def f(:", "THING", "SyntaxError"),
        ("THING = 'x'", "not a target!", "cannot be used"),
    ],
)
def test_a_broken_plugin_is_isolated_and_reported(
    install: Installer, source: str, target: str, reason: str
) -> None:
    points = f"[{GROUP}]\nbroken = steelyard_broken:{target}\ngood = steelyard_good:THING\n"
    install("strange-things", points, steelyard_broken=source, steelyard_good="THING = 'fine'\n")
    found = registry(a="one").with_entry_points(GROUP)
    with pytest.raises(RegistrationError) as caught:
        found.get("broken")
    assert str(caught.value).startswith("the thing 'broken' of the package strange-things cannot be used: ")
    assert reason in str(caught.value)
    assert "\n" not in str(caught.value)
    loaded, broken = found.load_all()
    assert loaded == {"a": "one", "good": "fine"}
    assert broken == (BrokenPlugin("broken", "the package strange-things", str(caught.value)),)


def test_taken_and_malformed_names_are_set_aside_and_the_rest_goes_on(install: Installer) -> None:
    points = (
        f"[{GROUP}]\na = steelyard_things:ONE\nBad Name = steelyard_things:ONE\nfine = steelyard_things:ONE\n"
    )
    install("pushy-things", points, steelyard_things="ONE = 'theirs'\n")
    found = registry(a="ours").with_entry_points(GROUP)
    assert found.names == ("a", "fine")
    assert found.get("a") == "ours"
    assert {plugin.name for plugin in found.refused} == {"a", "Bad Name"}
    loaded, broken = found.load_all()
    assert loaded == {"a": "ours", "fine": "theirs"}
    assert broken == found.refused
    assert all(plugin.provider == "the package pushy-things" for plugin in broken)


def test_of_two_packages_the_first_in_the_alphabet_gets_the_name(install: Installer) -> None:
    install("zeta-things", f"[{GROUP}]\nshared = steelyard_zeta:ONE\n", steelyard_zeta="ONE = 'zeta'\n")
    install("alpha-things", f"[{GROUP}]\nshared = steelyard_alpha:ONE\n", steelyard_alpha="ONE = 'alpha'\n")
    found = registry().with_entry_points(GROUP)
    assert found.get("shared") == "alpha"
    assert [plugin.provider for plugin in found.refused] == ["the package zeta-things"]
    assert "already taken by the package alpha-things" in found.refused[0].reason


def test_a_package_without_metadata_does_not_disturb_the_others(install: Installer) -> None:
    install(
        "ruin", f"[{GROUP}]\nleft = steelyard_left:ONE\n", metadata=False, steelyard_left="ONE = 'left'\n"
    )
    install("whole", f"[{GROUP}]\nright = steelyard_right:ONE\n", steelyard_right="ONE = 'right'\n")
    found = registry().with_entry_points(GROUP)
    assert found.names == ("left", "right")
    assert found.entries["left"].provider == "an unnamed package"
    assert found.load_all() == ({"left": "left", "right": "right"}, ())


def test_a_data_set_may_come_from_another_package(install: Installer) -> None:
    source = (
        "from dataclasses import replace\nfrom steelyard.datasets import dataset_registry\n"
        "MOOR = replace(dataset_registry().get('islands'), name='moor')\n"
    )
    targets = {"moor": "MOOR", "mire": "MOOR", "bog": "replace"}
    points = "[steelyard.datasets]\n" + "".join(f"{k} = steelyard_moor:{v}\n" for k, v in targets.items())
    install("moor-data", points, steelyard_moor=source)
    found, broken = dataset_registry().load_all()
    assert {"islands", "moor"} <= set(found)
    assert found["moor"].load().n_nodes == 60
    reasons = {plugin.name: plugin.reason for plugin in broken}
    assert "calls itself 'moor' but is registered as 'mire'" in reasons["mire"]
    assert "must be a steelyard.datasets.DataSet; got function" in reasons["bog"]
