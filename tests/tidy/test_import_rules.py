"""The import rule: contracts of pyproject.toml, and what a running process has loaded."""

from __future__ import annotations

import subprocess
import sys
import tomllib
from pathlib import Path
from typing import Any

import pytest

Contract = dict[str, Any]

EVENT_LOOP_ROOMS = ("edgectl.runtime", "edgectl.console")


def read_contracts(repo_root: Path) -> list[Contract]:
    config = tomllib.loads((repo_root / "pyproject.toml").read_text())
    contracts: list[Contract] = config["tool"]["importlinter"]["contracts"]
    return contracts


def modules_named(contracts: list[Contract]) -> set[str]:
    """Our own modules that the contracts speak of, without wildcards."""
    keys = ("source_modules", "forbidden_modules", "protected_modules", "allowed_importers")
    named = {name for contract in contracts for key in keys for name in contract.get(key, [])}
    for contract in contracts:
        for layer in contract.get("layers", []):
            tails = layer.replace("|", " ").replace(":", " ").replace("(", " ").replace(")", " ")
            named |= {f"{contract['containers'][0]}.{tail}" for tail in tails.split()}
    return {name for name in named if is_own(name)}


def is_own(name: str) -> bool:
    return name.split(".", maxsplit=1)[0] in ("edgectl", "sim_server") and "*" not in name


def module_exists(repo_root: Path, name: str) -> bool:
    path = repo_root.joinpath(*name.split("."))
    return path.with_suffix(".py").is_file() or (path / "__init__.py").is_file()


def lint_imports(root: Path, config: Path, *options: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-c", "from importlinter.cli import lint_imports_command as c; c()",
         "--no-cache", "--no-logo", *options, str(config)],
        cwd=root, capture_output=True, text=True, check=False,
    )  # fmt: skip


def missing_modules(repo_root: Path) -> set[str]:
    named = modules_named(read_contracts(repo_root))
    return {name for name in named if not module_exists(repo_root, name)}


def test_every_module_of_the_contracts_exists(repo_root: Path) -> None:
    assert not missing_modules(repo_root)


def test_contracts_are_kept(repo_root: Path) -> None:
    done = lint_imports(repo_root, repo_root / "pyproject.toml")
    assert done.returncode == 0, done.stdout + done.stderr


# One forbidden import per contract, planted in a small copy of the house.
PLANTED = {
    "layers": ("edgectl/opcua/bad.py", "import edgectl.journal"),
    "records": ("edgectl/records/bad.py", "import edgectl.ports"),
    "pure": ("edgectl/column/bad.py", "import edgectl.clock"),
    "cycle": ("edgectl/cycle/bad.py", "import edgectl.properties"),
    "loop": ("edgectl/runtime/loop.py", "import edgectl.opcua"),
    "startup": ("edgectl/runtime/supervise.py", "import edgectl.journal"),
    "casadi": ("edgectl/worker/handle.py", "import edgectl.worker.child"),
    "asyncua": ("edgectl/journal/bad.py", "import asyncua"),
    "sim_server": ("sim_server/bad.py", "import edgectl.column"),
    "no_plant_in_product": ("edgectl/console/bad.py", "import sim_server"),
}


def build_small_house(root: Path, contracts: list[Contract]) -> None:
    """Empty modules under the contracts' names, and a child that loads CasADi."""
    for name in sorted(modules_named(contracts) | {"edgectl.worker.child"}):
        parts = name.split(".")
        is_leaf_file = len(parts) == 3 or name in ("edgectl.ports", "edgectl.clock")
        folder = root.joinpath(*(parts[:-1] if is_leaf_file else parts))
        folder.mkdir(parents=True, exist_ok=True)
        for package in (folder, *folder.parents):
            if package.is_relative_to(root) and package != root:
                (package / "__init__.py").touch()
        if is_leaf_file:
            (folder / f"{parts[-1]}.py").touch()
    (root / "edgectl/records/units.py").touch()
    (root / "edgectl/worker/child.py").write_text("import casadi\n")


def test_contracts_hold_in_a_clean_small_house(repo_root: Path, tmp_path: Path) -> None:
    build_small_house(tmp_path, read_contracts(repo_root))
    done = lint_imports(tmp_path, repo_root / "pyproject.toml")
    assert done.returncode == 0, done.stdout + done.stderr


def test_each_contract_has_a_planted_fault(repo_root: Path) -> None:
    assert {contract["id"] for contract in read_contracts(repo_root)} == set(PLANTED)


@pytest.mark.parametrize("contract", sorted(PLANTED))
def test_each_contract_sees_its_planted_fault(
    contract: str, repo_root: Path, tmp_path: Path
) -> None:
    build_small_house(tmp_path, read_contracts(repo_root))
    file, line = PLANTED[contract]
    (tmp_path / file).write_text(line + "\n")
    done = lint_imports(tmp_path, repo_root / "pyproject.toml", "--contract", contract)
    assert done.returncode == 1, done.stdout + done.stderr
    assert "BROKEN" in done.stdout


LOADED_BY = """
import importlib, pkgutil, sys
for room in sys.argv[1:]:
    package = importlib.import_module(room)
    for module in pkgutil.walk_packages(package.__path__, room + "."):
        importlib.import_module(module.name)
print("\\n".join(sorted(sys.modules)))
"""


def modules_loaded_by(root: Path, *rooms: str) -> set[str]:
    done = subprocess.run(
        [sys.executable, "-c", LOADED_BY, *rooms],
        cwd=root, capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    return set(done.stdout.split())


def test_the_event_loop_process_does_not_load_casadi(repo_root: Path) -> None:
    loaded = modules_loaded_by(repo_root, *EVENT_LOOP_ROOMS)
    assert set(EVENT_LOOP_ROOMS) <= loaded
    assert "casadi" not in loaded


def test_a_room_that_loads_casadi_is_seen(tmp_path: Path) -> None:
    (tmp_path / "room").mkdir()
    (tmp_path / "room/__init__.py").touch()
    (tmp_path / "room/inner.py").write_text("import casadi\n")
    assert "casadi" in modules_loaded_by(tmp_path, "room")
