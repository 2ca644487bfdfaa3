"""Runs the application in this process until a signal ends it.

A worker is started first: it loads the solver while this process loads the database and the framework.
"""

from __future__ import annotations

import gc
import socket
from collections.abc import Callable

from service.engine.records import Engine
from service.settings import Settings
from service.workers import workers

SHUTDOWN_SECONDS = 3
KEEP_ALIVE_SECONDS = 30  # with a short one a busy machine closes connections that are about to be used


class ListenError(Exception):
    """The address cannot be listened on."""


def run(settings: Settings, announce: Callable[[str], None]) -> None:
    """Serve until SIGINT or SIGTERM; `announce` gets the address, with the port that port 0 led to.

    Raises ListenError, and StoreError where the data directory or the database cannot be used.
    """
    with _listener(settings) as listener:
        engine = workers(settings)
        engine.prepare()
        try:
            _serve(listener, settings, engine, announce)
        finally:
            engine.close()


def _serve(listener: socket.socket, settings: Settings, engine: Engine, announce: Callable[[str], None]) -> None:
    # Loaded before anything begins: further workers would take the processor away from it.
    import uvicorn

    from service import later
    from service.app import create_app
    from service.services import Services

    class Server(uvicorn.Server):
        """Tells the address once requests are answered."""

        async def startup(self, sockets: list[socket.socket] | None = None) -> None:
            await super().startup(sockets)
            if self.started:
                announce(_address(listener))
                later.load()

    services = Services.start(settings, engine=engine)
    try:
        app = create_app(settings, services)
        gc.freeze()  # what is loaded now stays
        gc.enable()
        config = uvicorn.Config(
            app,
            access_log=False,
            server_header=False,
            lifespan="on",
            log_level="warning",
            timeout_keep_alive=KEEP_ALIVE_SECONDS,
            timeout_graceful_shutdown=SHUTDOWN_SECONDS,
        )
        Server(config).run(sockets=[listener])
    finally:
        services.close()


def _listener(settings: Settings) -> socket.socket:
    family = socket.AF_INET6 if ":" in settings.host else socket.AF_INET
    # With the protocol named, asyncio turns Nagle's delay off, which else adds 40 ms to most answers.
    listener = socket.socket(family, socket.SOCK_STREAM, socket.IPPROTO_TCP)
    try:
        listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        listener.bind((settings.host, settings.port))
    except OSError as error:
        listener.close()
        raise ListenError(f"{settings.host} port {settings.port} cannot be used: {error.strerror}") from None
    return listener


def _address(listener: socket.socket) -> str:
    host, port = listener.getsockname()[:2]
    return f"http://{f'[{host}]' if ':' in host else host}:{port}"
