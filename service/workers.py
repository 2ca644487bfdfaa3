"""The engine that these settings ask for.  Imports little, so that workers can be started before anything else is."""

from __future__ import annotations

from service.engine.local import LocalEngine
from service.settings import Settings


def workers(settings: Settings, *, job: str = "service.jobs:solve") -> LocalEngine:
    """An engine that is not started; `job` is the function of the workers, "module:function"."""
    memory = settings.memory_mb * 2**20
    return LocalEngine(settings.workers, job=job, memory=memory, cancel_grace=settings.cancel_grace)
