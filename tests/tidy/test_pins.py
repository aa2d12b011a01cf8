"""`deploy/constraints.txt` pins all that is installed, and the suite runs on exactly those pins."""

from __future__ import annotations

import tomllib
from collections.abc import Callable, Iterable
from importlib import metadata
from pathlib import Path

from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

Lookup = Callable[[str], tuple[str, list[str]]]


def read_pins(text: str) -> dict[str, str]:
    lines = (line.split("#")[0].strip() for line in text.splitlines())
    pairs = (line.split("==") for line in lines if line)
    return {str(canonicalize_name(name)): version for name, version in pairs}


def installed(name: str) -> tuple[str, list[str]]:
    """Version and requirements of an installed distribution."""
    distribution = metadata.distribution(name)
    return distribution.version, distribution.requires or []


def closure(requirements: Iterable[str], look_up: Lookup) -> dict[str, str]:
    """Every distribution that the requirements pull in here, with its version."""
    found: dict[str, str] = {}
    waiting = [(Requirement(text), "") for text in requirements]
    while waiting:
        requirement, extra = waiting.pop()
        name = str(canonicalize_name(requirement.name))
        if requirement.marker and not requirement.marker.evaluate({"extra": extra}):
            continue
        if name in found and not requirement.extras:
            continue
        found[name], needs = look_up(requirement.name)
        extras = requirement.extras or {""}
        waiting += [(Requirement(text), asked) for text in needs for asked in extras]
    return found


def pin_problems(found: dict[str, str], pins: dict[str, str]) -> list[str]:
    return [
        f"{name} {version} is installed, the pin is {pins.get(name, 'missing')}"
        for name, version in sorted(found.items())
        if pins.get(name) != version
    ]


def test_every_installed_distribution_is_pinned(repo_root: Path) -> None:
    project = tomllib.loads((repo_root / "pyproject.toml").read_text())["project"]
    asked = project["dependencies"] + project["optional-dependencies"]["test"]
    pins = read_pins((repo_root / "deploy/constraints.txt").read_text())
    problems = pin_problems(closure(asked, installed), pins)
    assert not problems, "\n".join(problems)


def test_a_missing_and_a_wrong_pin_are_seen() -> None:
    world = {"a": ("1.0", ["b>=2", "c; extra == 'more'"]), "b": ("2.0", []), "c": ("3.0", [])}
    found = closure(["a"], world.__getitem__)
    assert found == {"a": "1.0", "b": "2.0"}
    assert closure(["a[more]"], world.__getitem__) == {"a": "1.0", "b": "2.0", "c": "3.0"}
    assert pin_problems(found, read_pins("# why\na==1.0\nB==2.1\n")) == [
        "b 2.0 is installed, the pin is 2.1"
    ]
    assert pin_problems(found, {"a": "1.0"}) == ["b 2.0 is installed, the pin is missing"]
