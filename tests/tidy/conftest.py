"""What the tidy tests share: which files are ours."""

from __future__ import annotations

from pathlib import Path

import pytest

SKIPPED_FOLDERS = {
    ".venv",
    ".git",
    ".mypy_cache",
    ".ruff_cache",
    ".pytest_cache",
    ".hypothesis",
    ".import_linter_cache",
    "__pycache__",
    "build",
    "dist",
    "runs",
}


@pytest.fixture(scope="session")
def own_files(repo_root: Path) -> list[Path]:
    """Every file of the project, without environments, caches and build results."""
    return sorted(
        path
        for path in repo_root.rglob("*")
        if path.is_file()
        and not any(
            part in SKIPPED_FOLDERS or part.endswith(".egg-info")
            for part in path.relative_to(repo_root).parts
        )
    )


@pytest.fixture(scope="session")
def production_files(repo_root: Path, own_files: list[Path]) -> list[Path]:
    """The Python files of `edgectl` and `sim_server`."""
    rooms = (repo_root / "edgectl", repo_root / "sim_server")
    return [
        path
        for path in own_files
        if path.suffix == ".py" and any(path.is_relative_to(room) for room in rooms)
    ]


@pytest.fixture(scope="session")
def python_files(own_files: list[Path]) -> list[Path]:
    """Every Python file of the project, tests included."""
    return [path for path in own_files if path.suffix == ".py"]
