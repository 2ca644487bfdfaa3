"""Figures of the service in Prometheus's text format; every application counts for itself."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping

from prometheus_client import CollectorRegistry, Counter, Histogram, generate_latest
from prometheus_client.core import GaugeMetricFamily, Metric
from prometheus_client.registry import Collector
from starlette.types import ASGIApp, Message, Receive, Scope, Send

METRICS_TYPE = "text/plain; version=0.0.4; charset=utf-8"
_SECONDS = (0.002, 0.005, 0.01, 0.025, 0.05, 0.1, 0.25, 0.5, 1.0, 2.5, 5.0, 10.0, 30.0, 60.0)


class Metrics:
    """Requests by route, method and status, their duration, and what `gauges` says at the moment of asking."""

    def __init__(self) -> None:
        self._registry = CollectorRegistry()
        labels = ["route", "method", "status"]
        self._requests = Counter("curvewright_requests", "Requests answered", labels, registry=self._registry)
        self._seconds = Histogram(
            "curvewright_request_seconds",
            "Time to the start of the answer",
            ["route", "method"],
            buckets=_SECONDS,
            registry=self._registry,
        )

    def watch(self, name: str, meaning: str, label: str, figures: Callable[[], Mapping[str, float]]) -> None:
        """Show `figures()` as a gauge, one line for each of its members."""
        self._registry.register(_Gauge(f"curvewright_{name}", meaning, label, figures))

    def count(self, route: str, method: str, status: int, seconds: float) -> None:
        """One request more."""
        self._requests.labels(route, method, str(status)).inc()
        self._seconds.labels(route, method).observe(seconds)

    def text(self) -> bytes:
        """Everything, ready to be answered."""
        return generate_latest(self._registry)


class _Gauge(Collector):
    def __init__(self, name: str, meaning: str, label: str, figures: Callable[[], Mapping[str, float]]) -> None:
        self._name, self._meaning, self._label, self._figures = name, meaning, label, figures

    def describe(self) -> list[Metric]:
        """Known without asking for the figures, so that registering costs no query."""
        return [GaugeMetricFamily(self._name, self._meaning, labels=[self._label])]

    def collect(self) -> Iterator[Metric]:
        """The gauge as it is now."""
        family = GaugeMetricFamily(self._name, self._meaning, labels=[self._label])
        for label, value in self._figures().items():
            family.add_metric([label], value)
        yield family


class CountRequests:
    """Counts every request under its route's pattern, so that addresses of runs never become labels."""

    def __init__(self, app: ASGIApp, metrics: Metrics) -> None:
        self.app = app
        self.metrics = metrics

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http":
            await self.app(scope, receive, send)
            return
        started = time.perf_counter()
        method = scope["method"] if scope["method"] in _KNOWN_METHODS else "other"

        async def counted(message: Message) -> None:
            if message["type"] == "http.response.start":
                route = getattr(scope.get("route"), "path", "none")
                self.metrics.count(route, method, message["status"], time.perf_counter() - started)
            await send(message)

        await self.app(scope, receive, counted)


_KNOWN_METHODS = frozenset({"GET", "HEAD", "POST", "PUT", "PATCH", "DELETE", "OPTIONS"})
