"""Asks a running server whether it is ready for runs; meant for health checks of containers and supervisors."""

from __future__ import annotations

from http.client import HTTPConnection, HTTPException

from service.settings import Settings

EVERY_ADDRESS = {"0.0.0.0": "127.0.0.1", "::": "::1"}
"""Addresses that mean "listen everywhere" -> where to ask on this machine."""


def is_ready(settings: Settings, seconds: float = 5.0) -> bool:
    """True where the server with these settings answers /readyz with 200 within `seconds`."""
    connection = HTTPConnection(EVERY_ADDRESS.get(settings.host, settings.host), settings.port, timeout=seconds)
    try:
        connection.request("GET", "/readyz")
        return connection.getresponse().status == 200
    except (OSError, HTTPException):
        return False
    finally:
        connection.close()
