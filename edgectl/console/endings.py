"""How a command ends: exit codes, expected errors without a traceback, JSON."""

from __future__ import annotations

import json
import sys
from collections.abc import Mapping
from enum import IntEnum
from pathlib import Path
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from edgectl.settings import Site


class Exit(IntEnum):
    """The exit codes of every command."""

    DONE = 0
    """Done and good."""
    FINDING = 1
    """Done, and something was found: a check failed, the chain is broken."""
    WRONG_USAGE = 2
    PLANT_NOT_REACHABLE = 75
    """A temporary failure (EX_TEMPFAIL of sysexits.h)."""
    SITE_FILE_WRONG = 78
    """A configuration error (EX_CONFIG of sysexits.h)."""


class EndedError(click.ClickException):
    """The command cannot go on: wrong usage. The message is for people, the code for scripts."""

    exit_code = Exit.WRONG_USAGE


class FoundError(EndedError):
    """What was to be looked at is broken."""

    exit_code = Exit.FINDING


class PlantNotReachableError(EndedError):
    exit_code = Exit.PLANT_NOT_REACHABLE


class SiteFileWrongError(EndedError):
    exit_code = Exit.SITE_FILE_WRONG


def load_site_or_end(path: Path) -> Site:
    """The site, or every finding and exit code 78."""
    from edgectl.settings import SiteFileError, load_site

    try:
        return load_site(path)
    except SiteFileError as error:
        raise SiteFileWrongError(str(error)) from error


def write_json(target: str | None, content: Mapping[str, object]) -> None:
    """Write to a file, or to standard output for `-`. Raises EndedError."""
    if target is None:
        return
    text = json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False) + "\n"
    if target == "-":
        sys.stdout.write(text)
        return
    write_text(Path(target), text)


def write_text(path: Path, text: str) -> None:
    """Write a file. Raises EndedError when that is not possible."""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
    except OSError as error:
        raise EndedError(f"cannot write {path}: {error.strerror}") from error


def say(words: str = "", *, json_target: str | None = None) -> None:
    """A line for people: on standard error when standard output belongs to the JSON."""
    click.echo(words, err=json_target == "-")
