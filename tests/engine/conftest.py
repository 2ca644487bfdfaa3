"""What tests of the engine share: the child finds `slot_jobs`, slots and dispatchers end with their test."""

import json
import os
import time
from pathlib import Path

import pytest

from service.dispatch import Dispatcher
from service.engine.records import Job
from service.engine.slot import Slot
from service.run import new_run
from service.settings import Settings
from service.store import Store
from service.workers import workers

ACT = "slot_jobs:act"
MEGABYTE = 2**20


@pytest.fixture(autouse=True)
def _child_finds_the_jobs(monkeypatch):
    monkeypatch.setenv("PYTHONPATH", str(Path(__file__).parent), prepend=os.pathsep)


@pytest.fixture
def make_slot():
    slots = []

    def make(job=ACT, memory=300 * MEGABYTE, cancel_grace=0.3):
        slots.append(Slot(job, memory=memory, cancel_grace=cancel_grace))
        return slots[-1]

    yield make
    for slot in slots:
        slot.close()


@pytest.fixture
def slot(make_slot):
    return make_slot()


@pytest.fixture
def make_job():
    def make(do="echo", *, id="a", wall=20.0, memory=300 * MEGABYTE, **order):
        body = json.dumps({"do": do, **order}).encode()
        return Job(id, body, {"id": id}, wall=wall, memory=memory)

    return make


@pytest.fixture
def settings(tmp_path):
    return Settings(data=tmp_path / "data", workers=1, cancel_grace=0.3, memory_mb=300, wall_grace=0.5)


@pytest.fixture
def start(settings):
    """Start a dispatcher on the test's directory, or on one of its own settings."""
    started = []

    def begin(*, job=ACT, **changes):
        changed = settings.model_copy(update=changes)
        store = Store(changed.database_url)
        dispatcher = Dispatcher(store, changed, workers(changed, job=job))
        dispatcher.start()
        started.append((dispatcher, store))
        return dispatcher, store

    yield begin
    for dispatcher, store in reversed(started):
        dispatcher.close()
        store.close()


@pytest.fixture
def submit():
    def send(dispatcher, do="echo", *, time_limit=20.0, priority=0, **order):
        run = new_run(do, "sha256:x", time_limit=time_limit, priority=priority)
        return dispatcher.submit(run, json.dumps({"do": do, **order}))

    return send


@pytest.fixture
def until():
    """Wait until something is true; what it was, or an assertion that it never came."""

    def wait(condition, seconds=15.0):
        deadline = time.monotonic() + seconds
        while time.monotonic() < deadline:
            if found := condition():
                return found
            time.sleep(0.01)
        raise AssertionError("it did not come true in time")

    return wait


@pytest.fixture
def ended(until):
    """Wait until a run has ended; the run."""

    def wait(store, run, seconds=20.0):
        def look():
            found = store.get(run.id)
            return found if found.state.ended else None

        return until(look, seconds)

    return wait
