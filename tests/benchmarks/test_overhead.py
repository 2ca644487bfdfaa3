"""What a run costs beyond its computation: acceptance on disk, the way to the worker and back, the result on disk."""

import time
from pathlib import Path

import pytest

from service.dispatch import Dispatcher
from service.run import State, new_run
from service.settings import Settings
from service.store import Store
from service.workers import workers

JOBS = Path(__file__).parents[1] / "engine"


@pytest.fixture
def served(tmp_path, monkeypatch):
    monkeypatch.setenv("PYTHONPATH", str(JOBS))
    settings = Settings(data=tmp_path, workers=1)
    store = Store(settings.database_url)
    dispatcher = Dispatcher(store, settings, workers(settings, job="slot_jobs:act"))
    dispatcher.start()
    while not dispatcher.capacity().alive:
        time.sleep(0.01)
    yield dispatcher, store
    dispatcher.close()
    store.close()


def test_a_trivial_run_from_acceptance_to_its_result(benchmark, served):
    """At most 3 ms where nothing else runs; two commits are most of it, so `commit_ms` stands beside it."""
    dispatcher, store = served

    def run():
        id = dispatcher.submit(new_run("", ""), '{"do": "echo"}').id
        while not store.get(id).state.ended:
            time.sleep(0.0002)
        return id

    assert store.get(benchmark.pedantic(run, rounds=200, warmup_rounds=20)).state is State.FINISHED
    benchmark.extra_info["commit_ms"] = _median_ms(lambda: store.renew("nobody", 1.0) or store.writable())


def _median_ms(action, times=50):
    laps = []
    for _ in range(times):
        began = time.perf_counter()
        action()
        laps.append(time.perf_counter() - began)
    return sorted(laps)[times // 2] * 1e3
