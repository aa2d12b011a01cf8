"""Where the password may be."""

from __future__ import annotations

from pathlib import Path

import pytest

from edgectl.runtime.password import PasswordError, password_of
from edgectl.settings.site import Server


def server(**where: str) -> Server:
    return Server(
        endpoint="opc.tcp://127.0.0.1:4840/",
        security="none",
        allow_insecure=True,
        read_timeout_s=1.0,
        write_timeout_s=1.0,
        clock_offset_limit_s=1.0,
        **where,
    )


def test_no_place_means_no_password() -> None:
    assert password_of(server(), {"PASSWORD": "x"}) is None


def test_from_the_environment() -> None:
    assert password_of(server(password_env="PLANT"), {"PLANT": " pass word "}) == " pass word "


@pytest.mark.parametrize("environment", [{}, {"PLANT": ""}])
def test_a_variable_that_is_not_set_is_named(environment: dict[str, str]) -> None:
    with pytest.raises(PasswordError, match="PLANT is not set"):
        password_of(server(password_env="PLANT"), environment)


def test_from_a_file_without_its_line_end(tmp_path: Path) -> None:
    path = tmp_path / "password"
    path.write_bytes("grüße \r\n".encode())
    assert password_of(server(password_file=str(path)), {}) == "grüße "


@pytest.mark.parametrize("content", [b"", b"\n", b"x" * 5000, b"\xff\xfe"])
def test_a_file_without_a_password_is_refused_and_not_quoted(
    tmp_path: Path, content: bytes
) -> None:
    path = tmp_path / "password"
    path.write_bytes(content)
    with pytest.raises(PasswordError) as found:
        password_of(server(password_file=str(path)), {})
    assert str(path) in str(found.value)
    assert "xxx" not in str(found.value)


def test_a_missing_file_is_named(tmp_path: Path) -> None:
    with pytest.raises(PasswordError, match="No such file"):
        password_of(server(password_file=str(tmp_path / "none")), {})
