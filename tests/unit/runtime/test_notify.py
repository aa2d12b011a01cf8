"""Telling the service manager."""

from __future__ import annotations

import socket
from pathlib import Path

import pytest

from edgectl.runtime.notify import ServiceNotifier


@pytest.mark.parametrize("abstract", [False, True])
def test_what_is_told_arrives_as_one_datagram(tmp_path: Path, abstract: bool) -> None:
    path = str(tmp_path / "notify")
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as manager:
        manager.bind("\0" + path if abstract else path)
        manager.settimeout(5.0)
        address = "@" + path if abstract else path
        ServiceNotifier({"NOTIFY_SOCKET": address}).tell("READY=1", "STATUS=advising")
        assert manager.recv(1000) == b"READY=1\nSTATUS=advising"


def test_nobody_listens_and_nothing_happens(tmp_path: Path) -> None:
    ServiceNotifier({}).tell("READY=1")
    ServiceNotifier({"NOTIFY_SOCKET": str(tmp_path / "nobody")}).tell("READY=1")
