"""A built package carries every file that the code reads beside itself."""

from __future__ import annotations

import tomllib
from collections.abc import Iterable
from pathlib import Path

PACKAGES = ("edgectl", "sim_server")


def left_behind(package: Path, patterns: Iterable[str], files: Iterable[Path]) -> list[Path]:
    """Files of a package that are neither Python nor named by its package-data patterns."""
    carried = {path for pattern in patterns for path in package.glob(pattern)}
    return [path for path in files if path.suffix != ".py" and path not in carried]


def test_package_data_is_complete(repo_root: Path, own_files: list[Path]) -> None:
    config = tomllib.loads((repo_root / "pyproject.toml").read_text())
    patterns = config["tool"]["setuptools"]["package-data"]
    missing = [
        str(path.relative_to(repo_root))
        for name in PACKAGES
        for path in left_behind(
            repo_root / name,
            patterns[name],
            [file for file in own_files if file.is_relative_to(repo_root / name)],
        )
    ]
    assert not missing, f"not in package-data of pyproject.toml: {missing}"


def test_a_file_left_behind_is_seen(tmp_path: Path) -> None:
    room = tmp_path / "room"
    room.mkdir()
    files = [room / "code.py", room / "table.toml", room / "page.css"]
    for file in files:
        file.touch()
    assert left_behind(tmp_path, ["**/*.toml"], files) == [room / "page.css"]
