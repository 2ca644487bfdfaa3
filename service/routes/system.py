"""Is it alive, is it ready, what are its figures."""

from __future__ import annotations

from fastapi import APIRouter
from starlette.responses import JSONResponse, Response

from service.errors import Fault
from service.metrics import METRICS_TYPE
from service.openapi import failures, shape
from service.routes.needs import TheServices

router = APIRouter(tags=["health"])


@router.get("/livez", summary="Is the process alive?", response_model=None)
async def live() -> Response:
    """200 as long as the process answers at all."""
    return JSONResponse({"alive": True})


@router.get(
    "/readyz",
    summary="Is the service ready for runs?",
    response_model=None,
    responses={200: shape("Readiness"), **failures("not-ready")},
)
def ready(services: TheServices) -> Response:
    """200 where the database can be written and a worker is up; else 503, and the body says what is missing."""
    state = {"database": services.store.writable(), "workers": services.workers_alive()}
    if all(state.values()):
        return JSONResponse({"ready": True, **state})
    missing = [
        name for name, good in (("a writable database", state["database"]), ("a worker", state["workers"])) if not good
    ]
    raise Fault("not-ready", f"Missing: {' and '.join(missing)}.", headers={"retry-after": "1"}, members=state)


@router.get(
    "/metrics",
    summary="Figures for monitoring",
    response_class=Response,
    response_model=None,
    responses={200: {"description": "The figures", "content": {"text/plain": {}}}},
)
def metrics(services: TheServices) -> Response:
    """Prometheus's text format."""
    return Response(services.metrics.text(), media_type=METRICS_TYPE)
