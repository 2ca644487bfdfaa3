"""The embedded engine: order of the queue, cancels wherever a job is, every job ends exactly once."""

import os
import signal
import threading

import pytest

from service.engine.local import LocalEngine
from service.engine.records import Ending, Job

MEGABYTE = 2**20


class Log:
    """A sink that remembers."""

    def __init__(self):
        self.events = []
        self.outcomes = []
        self.changed = threading.Condition()

    def progress(self, job, event):
        with self.changed:
            self.events.append((job.id, event))
            self.changed.notify_all()

    def ended(self, job, outcome):
        with self.changed:
            self.outcomes.append((job.id, outcome))
            self.changed.notify_all()

    def wait_for(self, condition):
        with self.changed:
            assert self.changed.wait_for(condition, 15)

    def order(self):
        return [id for id, _ in self.outcomes]


@pytest.fixture
def log():
    return Log()


@pytest.fixture
def make_engine(log):
    engines = []

    def make(slots, start=True):
        engines.append(LocalEngine(slots, job="slot_jobs:act", memory=300 * MEGABYTE, cancel_grace=0.3))
        if start:
            engines[-1].start(log)
        return engines[-1]

    yield make
    for engine in engines:
        engine.close()


def with_place(id, priority, created):
    return Job(id, b"{}", priority=priority, created=created)


def test_the_queue_is_by_priority_then_age(make_engine, log):
    engine = make_engine(1, start=False)
    for id, priority, created in [("young", 0, 2.0), ("old", 0, 1.0), ("urgent", 5, 3.0)]:
        engine.submit(with_place(id, priority, created))
    engine.start(log)
    log.wait_for(lambda: len(log.outcomes) == 3)
    assert log.order() == ["urgent", "old", "young"]


def test_slots_work_side_by_side(make_engine, make_job, log):
    engine = make_engine(2)
    for id in "ab":
        engine.submit(make_job("sleep", id=id, seconds=30))
    log.wait_for(lambda: {id for id, _ in log.events} == {"a", "b"})
    assert (engine.capacity().slots, engine.capacity().free, engine.capacity().alive) == (2, 0, 2)


def test_a_queued_job_is_cancelled_without_having_begun(make_engine, make_job, log):
    engine = make_engine(1)
    engine.submit(make_job("sleep", id="busy", seconds=30))
    engine.submit(make_job(id="queued"))
    log.wait_for(lambda: log.events)
    assert engine.cancel("queued")
    assert log.order() == ["queued"]
    assert log.outcomes[0][1].ending is Ending.STOPPED


def test_a_cancel_reaches_only_its_job(make_engine, make_job, log):
    engine = make_engine(1)
    engine.submit(make_job("sleep", id="first", seconds=30))
    log.wait_for(lambda: log.events)
    assert engine.cancel("first")
    engine.submit(make_job(id="second"))
    log.wait_for(lambda: len(log.outcomes) == 2)
    assert [outcome.ending for _, outcome in log.outcomes] == [Ending.STOPPED, Ending.ANSWERED]
    assert not engine.cancel("first")


def test_a_dead_idle_child_is_replaced_without_a_job(make_engine, make_job, log, until):
    engine = make_engine(1)
    engine.submit(make_job(id="a"))
    log.wait_for(lambda: log.outcomes)
    os.kill(log.outcomes[0][1].head["pid"], signal.SIGKILL)
    until(lambda: engine.capacity().alive == 0)
    until(lambda: engine.capacity().alive == 1)


def test_closing_ends_every_job_once(make_engine, make_job, log):
    engine = make_engine(1)
    engine.submit(make_job("deaf", id="running"))
    engine.submit(make_job(id="queued"))
    log.wait_for(lambda: log.events)
    engine.close()
    assert sorted(log.order()) == ["queued", "running"]
    engine.submit(make_job(id="too late"))
    assert sorted(log.order()) == ["queued", "running", "too late"]
    assert {outcome.ending for _, outcome in log.outcomes} == {Ending.CLOSED}


def test_an_error_in_the_sink_costs_no_slot(make_engine, make_job, log):
    engine = make_engine(1)
    failing = log.ended
    log.ended = lambda job, outcome: 1 / 0
    engine.submit(make_job(id="a"))
    engine.submit(make_job("count", id="b", steps=1))
    log.wait_for(lambda: any(id == "b" for id, _ in log.events))
    log.ended = failing
    engine.submit(make_job(id="c"))
    log.wait_for(lambda: "c" in log.order())
