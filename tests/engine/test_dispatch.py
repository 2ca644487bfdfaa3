"""What happens to a run between its acceptance and its end, with real workers and a real database."""

import asyncio
import json
import os
import signal
import threading
import time

import pytest
import sqlalchemy as sql

from service.owner import DirectoryInUseError
from service.run import IdempotencyError, QueueFullError, State, StoreFullError, new_run


def works_on(dispatcher, run):
    """True once the worker has told anything about the run, be it shown or held back for a moment."""
    channel = dispatcher._progress._channels[run.id]
    return channel.number > 1 or channel.pending is not None


def progress_of(dispatcher, run, after=None):
    async def collect():
        return [event async for event in dispatcher.follow(run.id, after)]

    return asyncio.run(collect())


def test_a_run_is_solved_and_its_result_kept(start, submit, ended):
    dispatcher, store = start()
    run = ended(store, submit(dispatcher, say="hello"))
    assert (run.state, run.attempt, run.deaths, run.owner) == (State.FINISHED, 1, 0, None)
    assert (run.verdict, run.value, run.value_error, run.value_unit) == ("local minimum", 1.5, 1e-9, "m")
    assert 0 < run.seconds < 10
    assert json.loads(store.result(run.id)) == {"id": run.id, "answer": "hello"}


def test_waiting_runs_are_taken_by_priority(start, submit, ended, tmp_path):
    dispatcher, store = start()
    file = str(tmp_path / "order")
    submit(dispatcher, "append", file=file, say="first", seconds=0.5)
    later = [submit(dispatcher, "append", file=file, say=f"priority {n}", priority=n) for n in (0, 2, 1)]
    for run in later:
        ended(store, run)
    assert (tmp_path / "order").read_text().splitlines() == ["first", "priority 2", "priority 1", "priority 0"]


def test_wait_returns_the_ended_run(start, submit):
    dispatcher, _ = start()
    run = asyncio.run(dispatcher.wait(submit(dispatcher, "count", steps=10).id, 15))
    assert run.state is State.FINISHED


def test_wait_returns_the_run_as_it_is_when_time_is_over(start, submit):
    dispatcher, _ = start()
    run = asyncio.run(dispatcher.wait(submit(dispatcher, "sleep", seconds=30).id, 0.2))
    assert run.state is State.SOLVING
    assert asyncio.run(dispatcher.wait("unheard-of", 5)) is None


def test_a_crash_three_times_is_a_failed_run_with_the_reason(start, submit, ended):
    dispatcher, store = start()
    run = ended(store, submit(dispatcher, "die", signal="SIGSEGV"))
    assert (run.state, run.attempt, run.deaths) == (State.FAILED, 3, 3)
    assert run.reason == "its worker died 3 times, the last time by signal 11 (SIGSEGV)"
    assert ended(store, submit(dispatcher)).state is State.FINISHED


def test_a_single_crash_is_made_good(start, submit, ended, tmp_path):
    dispatcher, store = start()
    run = ended(store, submit(dispatcher, "die once", mark=str(tmp_path / "mark")))
    assert (run.state, run.attempt, run.deaths) == (State.FINISHED, 2, 1)


@pytest.mark.parametrize(
    ("order", "reason"),
    [
        ({"do": "deaf", "time_limit": 0.3}, "wall limit: killed after 0.8 s"),
        ({"do": "hog", "megabytes": 2000}, "memory limit: it needed more than 300 MB"),
        ({"do": "raise", "say": "oh"}, "error in the worker: ArithmeticError: oh"),
    ],
    ids=["wall", "memory", "exception"],
)
def test_a_limit_or_an_exception_is_final(start, submit, ended, order, reason):
    dispatcher, store = start()
    run = ended(store, submit(dispatcher, **order))
    assert (run.state, run.attempt, run.reason) == (State.FAILED, 1, reason)


def test_the_longest_solve_bounds_the_documents_own_limit(start, submit, ended):
    dispatcher, store = start(longest_solve=0.3)
    assert ended(store, submit(dispatcher, "deaf", time_limit=1000)).reason == "wall limit: killed after 0.8 s"


def test_an_answer_that_cannot_be_kept_fails_the_run(start, submit, ended):
    dispatcher, store = start(job="slot_jobs:unusable")
    run = ended(store, submit(dispatcher))
    assert (run.state, run.reason) == (State.FAILED, "internal error: the worker's answer could not be kept")


def test_a_cancelled_run_keeps_what_it_has(start, submit, ended, until):
    dispatcher, store = start()
    run = submit(dispatcher, "count", steps=5000)
    until(lambda: dispatcher._progress._channels[run.id].number > 2)
    assert dispatcher.cancel(run.id).cancel_asked
    run = ended(store, run)
    assert (run.state, run.verdict) == (State.STOPPED, "local minimum")
    assert json.loads(store.result(run.id))["answer"] == "stopped"


def test_a_deaf_run_is_stopped_by_force(start, submit, ended, until):
    dispatcher, store = start()
    run = submit(dispatcher, "deaf")
    until(lambda: works_on(dispatcher, run))
    dispatcher.cancel(run.id)
    run = ended(store, run)
    assert (run.state, run.reason, store.result(run.id)) == (State.STOPPED, "stopped on request", None)


def test_a_waiting_run_stops_at_once(start, submit):
    dispatcher, store = start()
    submit(dispatcher, "sleep", seconds=30)
    waiting = submit(dispatcher)
    assert waiting.state is State.WAITING
    assert dispatcher.cancel(waiting.id).state is State.STOPPED
    assert [event.data for event in progress_of(dispatcher, waiting)][-1] == {"kind": "end", "state": "stopped"}
    assert store.get(waiting.id).attempt == 0


def test_a_cancel_between_two_attempts_ends_the_run(start, submit, ended, until):
    dispatcher, store = start()
    busy = submit(dispatcher, "deaf")
    until(lambda: works_on(dispatcher, busy))
    store.ask_cancel(busy.id)  # as another server would, which cannot reach the worker
    pid = dispatcher._engine._slots[0]._process.pid
    os.kill(pid, signal.SIGKILL)
    run = ended(store, busy)
    assert (run.state, run.deaths) == (State.STOPPED, 1)


def test_another_servers_cancel_arrives_with_the_next_renewal(start, submit, ended, until):
    dispatcher, store = start(lease_seconds=0.3)
    run = submit(dispatcher, "count", steps=5000)
    until(lambda: works_on(dispatcher, run))
    store.ask_cancel(run.id)
    assert ended(store, run).state is State.STOPPED


def test_a_deleted_run_leaves_nothing_and_frees_its_slot(start, submit, ended, until):
    dispatcher, store = start()
    run = submit(dispatcher, "deaf")
    until(lambda: works_on(dispatcher, run))
    assert dispatcher.delete(run.id)
    assert not dispatcher.delete(run.id)
    assert ended(store, submit(dispatcher)).state is State.FINISHED
    assert (store.get(run.id), store.document(run.id), store.result(run.id)) == (None, None, None)


def test_the_same_key_and_body_is_the_same_run(start):
    dispatcher, store = start()
    first = dispatcher.submit(new_run("a", "h", key="k", key_hash="1"), "{}")
    again = dispatcher.submit(new_run("a", "h", key="k", key_hash="1"), "{}")
    assert again.id == first.id
    with pytest.raises(IdempotencyError, match="another body"):
        dispatcher.submit(new_run("a", "h", key="k", key_hash="2"), '{"a": 1}')
    assert sum(store.counts().values()) == 1


def test_one_key_sent_by_many_at_once_is_one_run(start):
    dispatcher, store = start()
    found = []
    threads = [
        threading.Thread(
            target=lambda: found.append(dispatcher.submit(new_run("a", "h", key="k", key_hash="1"), "{}").id)
        )
        for _ in range(8)
    ]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(found) == 8
    assert len(set(found)) == 1
    assert sum(store.counts().values()) == 1


def test_a_full_queue_refuses_and_keeps_what_it_has(start, submit):
    dispatcher, store = start(queue=2)
    submit(dispatcher, "sleep", seconds=30)
    submit(dispatcher)
    submit(dispatcher)
    with pytest.raises(QueueFullError, match="2 runs are waiting already"):
        submit(dispatcher)
    assert store.counts()[State.WAITING] == 2


def test_progress_is_in_order_thinned_and_ends_with_the_last_sign(start, submit):
    dispatcher, _ = start()
    events = [event.data for event in progress_of(dispatcher, submit(dispatcher, "count", steps=300, pause=0))]
    assert events[0] == {"kind": "state", "state": "solving"}
    assert [event["kind"] for event in events[-3:]] == ["iteration", "mesh", "end"]
    iterations = [event["iteration"] for event in events if event["kind"] == "iteration"]
    assert iterations == sorted(set(iterations))
    assert iterations[-1] == 299
    assert len(iterations) < 150
    assert events[-1] == {"kind": "end", "state": "finished"}


def test_progress_resumes_after_the_last_event_seen(start, submit):
    dispatcher, _ = start()
    run = submit(dispatcher, "count", steps=30)
    everything = progress_of(dispatcher, run)
    assert progress_of(dispatcher, run, everything[1].id) == everything[2:]
    assert progress_of(dispatcher, run, everything[-1].id) == []


def test_progress_of_an_earlier_life_is_its_end(start, submit, ended, settings, tmp_path):
    dispatcher, store = start()
    run = ended(store, submit(dispatcher))
    other, _ = start(data=tmp_path / "other", database=settings.database_url)
    assert [event.data for event in progress_of(other, run, "00000000.57")] == [{"kind": "end", "state": "finished"}]
    assert progress_of(other, new_run("a", "h")) == []


def test_a_run_solved_by_another_server_ends_here_too(start, submit, settings, tmp_path):
    dispatcher, _ = start()
    other, _ = start(data=tmp_path / "other", database=settings.database_url)
    run = submit(dispatcher, "count", steps=100)
    assert progress_of(other, run)[-1].data == {"kind": "end", "state": "finished"}


def test_two_servers_share_a_database_and_solve_each_run_once(start, submit, ended, settings, tmp_path):
    first, store = start()
    second, _ = start(data=tmp_path / "other", database=settings.database_url)
    file = tmp_path / "runs"
    runs = [submit(first if n % 2 else second, "append", file=str(file), say=str(n)) for n in range(30)]
    assert {ended(store, run).state for run in runs} == {State.FINISHED}
    assert sorted(file.read_text().split(), key=int) == [str(n) for n in range(30)]


def test_a_second_server_in_the_same_directory_is_refused(start):
    start()
    with pytest.raises(DirectoryInUseError, match="another server works in"):
        start()


def test_closing_lets_a_run_wait_for_the_next_start(start, submit, ended, until, settings, tmp_path):
    dispatcher, store = start()
    run = submit(dispatcher, "append", file=str(tmp_path / "file"), say="done", seconds=1)
    until(lambda: store.get(run.id).state is State.SOLVING)
    dispatcher.close()
    assert store.get(run.id).state is State.WAITING
    start()
    run = ended(store, run)
    assert (run.state, run.deaths) == (State.FINISHED, 0)
    assert (tmp_path / "file").read_text() == "done\n"


def test_an_outcome_waits_in_memory_while_the_disk_is_full(start, submit, ended, until):
    dispatcher, store = start()
    run = submit(dispatcher, "noise", seconds=0.5, bytes=200_000)

    @sql.event.listens_for(store._engine, "checkout")
    def narrow(connection, *_):  # as if the disk ended here: SQLite gives the same error
        connection.execute("PRAGMA max_page_count = 1")

    until(lambda: dispatcher._unwritten)
    assert store.get(run.id).state is State.SOLVING
    with pytest.raises(StoreFullError, match="full"):
        submit(dispatcher, say="x" * 100_000)
    sql.event.remove(store._engine, "checkout", narrow)
    sql.event.listen(
        store._engine, "checkout", lambda connection, *_: connection.execute("PRAGMA max_page_count = 100000")
    )
    assert ended(store, run).state is State.FINISHED
    assert len(json.loads(store.result(run.id))["answer"]) == 400_000
    assert not dispatcher._unwritten
    assert sum(store.counts().values()) == 1


def test_a_run_that_cannot_be_kept_is_not_solved_either(start, submit, ended, until, monkeypatch, tmp_path):
    dispatcher, store = start()
    mark = tmp_path / "mark"

    def full(*args, **options):
        until(mark.exists)  # the worker works on it by now
        raise StoreFullError("no room")

    with monkeypatch.context() as patched:
        patched.setattr(store, "accept", full)
        with pytest.raises(StoreFullError):
            submit(dispatcher, "count", steps=100_000, mark=str(mark))
    assert sum(store.counts().values()) == 0
    assert ended(store, submit(dispatcher)).state is State.FINISHED
    assert until(lambda: not dispatcher._held)


def test_nobody_is_told_of_a_run_before_it_is_on_disk(start, submit, ended, monkeypatch):
    dispatcher, store = start()
    steps = []
    accept, finish = store.accept, store.finish

    def slow(run, document, **options):
        time.sleep(0.5)  # the worker is done long before
        kept = accept(run, document, **options)
        steps.append("kept")
        return kept

    monkeypatch.setattr(store, "accept", slow)
    monkeypatch.setattr(store, "finish", lambda *args, **options: steps.append("finished") or finish(*args, **options))
    run = submit(dispatcher)
    assert steps[0] == "kept"
    assert store.get(run.id) is not None
    assert ended(store, run).state is State.FINISHED
    assert steps == ["kept", "finished"]
