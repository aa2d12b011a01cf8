"""Telling systemd (sd_notify(3)): ready, alive, stopping. Silent when nobody listens."""

from __future__ import annotations

import socket
from collections.abc import Mapping


class ServiceNotifier:
    """Sends datagrams to the socket that the service manager names in NOTIFY_SOCKET."""

    def __init__(self, environment: Mapping[str, str]) -> None:
        address = environment.get("NOTIFY_SOCKET", "")
        # A leading @ stands for the abstract namespace.
        self._address = "\0" + address[1:] if address.startswith("@") else address

    def tell(self, *assignments: str) -> None:
        """Send e.g. `READY=1`. A manager that does not listen is no reason to fail."""
        if not self._address:
            return
        message = "\n".join(assignments).encode("utf-8")
        try:
            with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM | socket.SOCK_NONBLOCK) as out:
                out.sendto(message, self._address)
        except OSError:
            # The watchdog of the manager notices what it does not hear; we have no other way.
            return
