"""The web application.  `create_app` makes a fresh one; nothing is shared between two of them."""

from __future__ import annotations

import socket
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from importlib.metadata import version

from fastapi import FastAPI
from starlette.concurrency import run_in_threadpool
from starlette.types import ASGIApp

from service import errors, openapi
from service.methods import HeadAnswers
from service.metrics import CountRequests, Metrics
from service.routes import check, events, pages, reference, runs, schema, static, system, tables
from service.security import LOOPBACK_NAMES, Gate, SecurityHeaders, known_host, own_origin
from service.services import Services
from service.settings import Settings


class Application(FastAPI):
    """FastAPI with the security headers outside of everything, so that the answer to a bug has them too."""

    def build_middleware_stack(self) -> ASGIApp:
        """The framework's layers within ours."""
        return SecurityHeaders(super().build_middleware_stack())


def create_app(settings: Settings, services: Services | None = None) -> FastAPI:
    """The application for these settings; what it needs starts and ends with its lifespan, or is `services`."""
    metrics = services.metrics if services else Metrics()

    @asynccontextmanager
    async def lifespan(app: FastAPI) -> AsyncIterator[None]:
        started = services if services else await run_in_threadpool(Services.start, settings, metrics)
        app.state.services = started
        try:
            yield
        finally:
            await run_in_threadpool(started.close)

    app = Application(
        title="Curvewright",
        version=version("curvewright"),
        lifespan=lifespan,
        openapi_url=None,
        docs_url=None,
        redoc_url=None,
        redirect_slashes=False,
        generate_unique_id_function=lambda route: route.name,  # operations are called as their functions are
    )
    # The last one added is the outermost.
    app.add_middleware(HeadAnswers)
    app.add_middleware(Gate, objection=own_origin)
    app.add_middleware(Gate, objection=known_host(_hosts(settings), addresses=not settings.loopback))
    app.add_middleware(CountRequests, metrics=metrics)
    errors.install(app)
    openapi.describe(app)
    for router in (
        check.router,
        runs.router,
        events.router,
        tables.router,
        schema.router,
        system.router,
        pages.router,
        reference.router,
        static.router(),
    ):
        app.include_router(router)
    return app


def _hosts(settings: Settings) -> frozenset[str]:
    """Names that the server answers for: those of this machine and those set."""
    further = {name.strip().lower() for name in settings.hosts.split(",") if name.strip()}
    own = set() if settings.loopback else {socket.gethostname().lower(), socket.getfqdn().lower()}
    return frozenset({*LOOPBACK_NAMES, *own, *further})
