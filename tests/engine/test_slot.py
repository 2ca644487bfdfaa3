"""A slot says exactly how an attempt ended, and is ready for the next one whatever happened."""

import os
import signal
import threading
import time

import pytest

from service.engine.process import Process
from service.engine.records import Ending

MEGABYTE = 2**20


def ignore(event):
    """For jobs whose progress does not matter."""


def test_an_answer_comes_back_with_progress_in_order(slot, make_job):
    events = []
    outcome = slot.run(make_job("count", steps=20, pause=0), events.append)
    assert outcome.ending is Ending.ANSWERED
    assert outcome.head["figures"]["verdict"] == "local minimum"
    assert outcome.body == b'{"id": "a", "answer": "counted"}'
    assert [event.get("iteration") for event in events] == [*range(20), None]


def test_one_child_does_many_jobs(slot, make_job):
    pids = {slot.run(make_job(say=number), ignore).head["pid"] for number in range(5)}
    assert len(pids) == 1
    assert pids.isdisjoint({os.getpid()})


def test_a_large_document_and_a_large_answer_pass(slot, make_job):
    said = "x" * 5 * MEGABYTE
    assert slot.run(make_job(say=said), ignore).body.decode() == '{"id": "a", "answer": "' + said + '"}'


def test_what_a_library_prints_does_not_disturb_the_frames(slot, make_job):
    assert slot.run(make_job("print"), ignore).body == b'{"id": "a", "answer": "printed"}'
    assert slot.run(make_job(say="next"), ignore).body == b'{"id": "a", "answer": "next"}'


@pytest.mark.parametrize(
    ("order", "reason"),
    [
        ({"do": "die", "signal": "SIGSEGV"}, "signal 11 (SIGSEGV)"),
        ({"do": "die", "signal": "SIGKILL"}, "signal 9 (SIGKILL)"),
        ({"do": "die", "signal": "SIGABRT"}, "signal 6 (SIGABRT)"),
        ({"do": "wild pointer"}, "signal 11 (SIGSEGV)"),
        ({"do": "leave"}, "exit code 7"),
    ],
    ids=lambda value: "-".join(value.values()) if isinstance(value, dict) else "",
)
def test_a_death_is_an_outcome_with_its_exact_reason(slot, make_job, order, reason):
    outcome = slot.run(make_job(**order), ignore)
    assert (outcome.ending, outcome.reason) == (Ending.DIED, reason)
    assert slot.run(make_job(say="next"), ignore).ending is Ending.ANSWERED


def test_the_log_gets_the_python_line_of_a_crash(slot, make_job):
    assert "slot_jobs.py" in slot.run(make_job("wild pointer"), ignore).detail


@pytest.mark.parametrize(
    ("do", "reason"), [("raise", "ArithmeticError: oh"), ("exit", "SystemExit: 3"), ("refused allocation", None)]
)
def test_an_exception_is_an_outcome_and_the_child_lives_on(slot, make_job, do, reason):
    first = slot.run(make_job(say="who"), ignore).head["pid"]
    outcome = slot.run(make_job(do, say="oh"), ignore)
    if reason is None:
        assert (outcome.ending, outcome.reason) == (Ending.LIMIT, "memory limit: an allocation was refused")
    else:
        assert (outcome.ending, outcome.reason) == (Ending.RAISED, reason)
    assert "slot_jobs.py" in outcome.detail
    assert slot.run(make_job(say="who"), ignore).head["pid"] == first


def test_a_memory_hog_is_killed_near_the_limit_and_named(slot, make_job):
    outcome = slot.run(make_job("hog", megabytes=2000, memory=150 * MEGABYTE), ignore)
    assert (outcome.ending, outcome.reason) == (Ending.LIMIT, "memory limit: it needed more than 150 MB")
    assert outcome.seconds < 15
    assert slot.run(make_job(say="next"), ignore).ending is Ending.ANSWERED


def test_what_a_job_starts_is_weighed_with_it_and_dies_with_it(slot, make_job):
    outcome = slot.run(make_job("hog beside", megabytes=120, memory=250 * MEGABYTE), ignore)
    assert (outcome.ending, outcome.reason) == (Ending.LIMIT, "memory limit: it needed more than 250 MB")
    assert slot.run(make_job(say="next"), ignore).ending is Ending.ANSWERED


def test_less_memory_than_the_limit_is_granted(slot, make_job):
    assert slot.run(make_job("hog", megabytes=100, memory=250 * MEGABYTE), ignore).ending is Ending.ANSWERED


def test_the_wall_limit_ends_even_a_deaf_job(slot, make_job):
    slot.tend()
    began = time.monotonic()
    outcome = slot.run(make_job("deaf", wall=0.4), ignore)
    assert (outcome.ending, outcome.reason) == (Ending.LIMIT, "wall limit: killed after 0.4 s")
    assert 0.4 <= time.monotonic() - began < 10


def test_a_cancel_lets_the_job_answer_with_what_it_has(slot, make_job):
    told = threading.Event()
    canceller = threading.Thread(target=lambda: told.wait(10) and slot.cancel())
    canceller.start()
    outcome = slot.run(make_job("count", steps=5000), lambda event: told.set())
    canceller.join()
    assert outcome.ending is Ending.ANSWERED
    assert outcome.head["stopped"] is True


def test_a_deaf_job_is_killed_after_the_grace(slot, make_job):
    cancelled = []

    def cancel(event):
        cancelled.append(time.monotonic())
        slot.cancel()

    outcome = slot.run(make_job("deaf"), cancel)
    assert (outcome.ending, outcome.reason) == (Ending.STOPPED, "stopped on request")
    assert 0.3 <= time.monotonic() - cancelled[0] < 10
    slot.arm()
    assert slot.run(make_job(say="next"), ignore).ending is Ending.ANSWERED


def test_the_death_of_an_idle_child_is_not_the_next_jobs(slot, make_job):
    pid = slot.run(make_job(say="who"), ignore).head["pid"]
    os.kill(pid, signal.SIGKILL)
    outcome = slot.run(make_job(say="who"), ignore)
    assert outcome.ending is Ending.ANSWERED
    assert outcome.head["pid"] != pid


def test_a_stopped_idle_child_holds_nothing_up_for_ever(slot, make_job, monkeypatch):
    monkeypatch.setattr("service.engine.process._SEND_SECONDS", 0.3)
    pid = slot.run(make_job(say="who"), ignore).head["pid"]
    os.kill(pid, signal.SIGSTOP)
    outcome = slot.run(make_job(say="x" * 5 * MEGABYTE), ignore)
    assert outcome.ending is Ending.ANSWERED
    assert outcome.head["pid"] != pid


def test_a_child_that_cannot_start_is_not_the_jobs_fault(make_slot, make_job):
    outcome = make_slot("slot_jobs:no_such_function").run(make_job(), ignore)
    assert outcome.ending is Ending.UNSTARTED
    assert "no_such_function" in outcome.reason


def test_shutting_ends_the_job_and_the_child(make_slot, make_job):
    slot = make_slot()
    outcome = slot.run(make_job("deaf"), lambda event: slot.shut())
    assert outcome.ending is Ending.CLOSED
    assert not slot.alive


def test_a_busy_child_ends_when_the_socket_closes(make_job):
    process = Process("slot_jobs:act", 0)
    while not process.receive(0.1):
        pass
    process.send({"kind": "job", "head": {}}, make_job("sleep", seconds=60).body)
    while not any(head["kind"] == "progress" for head, _ in process.receive(0.1)):
        pass
    process._socket.close()
    assert process._process.wait(5) == 0
    process._selector.close()
    process._output.close()


def test_an_error_of_the_listener_does_not_leave_the_job_running(slot, make_job):
    def fail(event):
        raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        slot.run(make_job("sleep", seconds=60), fail)
    assert slot.run(make_job(say="next"), ignore).body == b'{"id": "a", "answer": "next"}'


def test_a_fat_child_is_replaced_when_there_is_time(make_slot, make_job, monkeypatch):
    slot = make_slot()
    first = slot.run(make_job(say="who"), ignore).head["pid"]
    slot.tend()
    assert slot.run(make_job(say="who"), ignore).head["pid"] == first
    monkeypatch.setattr("service.engine.slot._IDLE_MEMORY", 1)
    slot.tend()
    assert slot.run(make_job(say="who"), ignore).head["pid"] != first
