"""The server's password: from where the site file says, never from the site file."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Final

from edgectl.settings.site import Server

MOST_BYTES: Final = 4096


class PasswordError(Exception):
    """The password is not where the site file says; the message says what to do."""


def password_of(server: Server, environment: Mapping[str, str]) -> str | None:
    """The password; None when the site file names no place for one. Raises PasswordError."""
    if server.password_env is not None:
        password = environment.get(server.password_env)
        if not password:
            raise PasswordError(
                f"the environment variable {server.password_env} is not set; the site file's"
                " [server] password_env says that the password is there"
            )
        return password
    if server.password_file is not None:
        return _from_file(Path(server.password_file))
    return None


def _from_file(path: Path) -> str:
    try:
        with path.open("rb") as file:
            data = file.read(MOST_BYTES + 1)
        text = data.decode("utf-8")
    except (OSError, UnicodeDecodeError) as error:
        why = error.strerror if isinstance(error, OSError) else "not UTF-8"
        raise PasswordError(f"cannot read the password in {path}: {why}") from error
    # An editor ends the line; a space in front or behind may be meant.
    password = text.rstrip("\r\n")
    if not password or len(data) > MOST_BYTES:
        raise PasswordError(f"{path} does not hold a password of 1 to {MOST_BYTES} bytes")
    return password
