"""Runs the application in this process until a signal ends it."""

from __future__ import annotations

import socket
from collections.abc import Callable

import uvicorn

from service.app import create_app
from service.settings import Settings

SHUTDOWN_SECONDS = 5


class _Server(uvicorn.Server):
    """Tells the address once requests are answered."""

    def __init__(self, config: uvicorn.Config, announce: Callable[[], None]) -> None:
        super().__init__(config)
        self._announce = announce

    async def startup(self, sockets: list[socket.socket] | None = None) -> None:
        await super().startup(sockets)
        if self.started:
            self._announce()


def run(settings: Settings, announce: Callable[[str], None]) -> None:
    """Serve until SIGINT or SIGTERM; `announce` gets the address, with the port that port 0 led to."""
    listener = _listener(settings)
    host, port = listener.getsockname()[:2]
    address = f"http://{f'[{host}]' if ':' in host else host}:{port}"
    config = uvicorn.Config(
        create_app(settings),
        access_log=False,
        server_header=False,
        lifespan="on",
        timeout_graceful_shutdown=SHUTDOWN_SECONDS,
        log_level="warning",
    )
    with listener:
        _Server(config, lambda: announce(address)).run(sockets=[listener])


def _listener(settings: Settings) -> socket.socket:
    family = socket.AF_INET6 if ":" in settings.host else socket.AF_INET
    listener = socket.socket(family, socket.SOCK_STREAM)
    listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    listener.bind((settings.host, settings.port))
    listener.set_inheritable(False)
    return listener
