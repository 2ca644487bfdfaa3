"""Progress reaches every follower in order, thinned, with the last sign kept, and can be resumed."""

import asyncio
import threading

import pytest

from service import progress
from service.progress import Progress

END = {"kind": "end", "state": "finished"}


def iteration(number):
    return {"kind": "iteration", "iteration": number}


@pytest.fixture
def hub():
    return Progress()


async def collect(hub, run="r", after=None):
    return [event async for event in hub.follow(run, after) if event is not None]


def data(events):
    return [event.data for event in events]


def test_a_late_follower_gets_what_was_told_before(hub):
    hub.publish("r", {"kind": "state", "state": "solving"})
    hub.publish("r", END)
    assert data(asyncio.run(collect(hub))) == [{"kind": "state", "state": "solving"}, END]


def test_a_burst_of_iterations_is_thinned_to_the_first_and_the_last(hub):
    hub.publish("r", {"kind": "state", "state": "solving"})
    for number in range(1000):
        hub.publish("r", iteration(number))
    hub.publish("r", {"kind": "mesh", "mesh": 1})
    hub.publish("r", END)
    events = data(asyncio.run(collect(hub)))
    assert events[-3:] == [iteration(999), {"kind": "mesh", "mesh": 1}, END]
    assert len(events) < 10


def test_a_held_back_iteration_is_shown_although_nothing_follows(hub):
    async def last_sign():
        hub.publish("r", iteration(1))
        hub.publish("r", iteration(2))
        async for event in hub.follow("r"):
            if event is not None and event.data == iteration(2):
                return event
        raise AssertionError("the stream ended")

    assert asyncio.run(asyncio.wait_for(last_sign(), 10)).data == iteration(2)


def test_all_followers_see_the_same_events_while_a_thread_publishes(hub):
    async def follow_together():
        followers = [asyncio.create_task(collect(hub)) for _ in range(3)]
        await asyncio.sleep(0)
        thread = threading.Thread(target=lambda: [hub.publish("r", {"kind": "mesh", "mesh": n}) for n in range(100)])
        thread.start()
        await asyncio.to_thread(thread.join)
        hub.publish("r", END)
        return await asyncio.gather(*followers)

    first, *others = asyncio.run(follow_together())
    assert data(first) == [{"kind": "mesh", "mesh": n} for n in range(100)] + [END]
    assert others == [first, first]


def test_following_resumes_after_the_id_given(hub):
    for number in range(5):
        hub.publish("r", {"kind": "mesh", "mesh": number})
    hub.publish("r", END)
    events = asyncio.run(collect(hub))
    for place, event in enumerate(events):
        assert asyncio.run(collect(hub, after=event.id)) == events[place + 1 :]


@pytest.mark.parametrize("after", ["", "17", "deadbeef.3", "x.y.z", "...", "٣"])
def test_an_id_of_another_life_begins_anew(hub, after):
    hub.publish("r", END)
    assert data(asyncio.run(collect(hub, after=after))) == [END]


def test_nothing_comes_after_the_end(hub):
    hub.publish("r", END)
    hub.publish("r", iteration(1))
    hub.publish("r", {"kind": "end", "state": "failed"})
    assert data(asyncio.run(collect(hub))) == [END]


def test_a_quiet_run_says_so_now_and_then(hub, monkeypatch):
    monkeypatch.setattr(progress, "_QUIET_SECONDS", 0.02)

    async def first():
        async for event in hub.follow("r"):
            return event
        raise AssertionError("the stream ended")

    assert asyncio.run(first()) is None


def test_waiting_for_the_end(hub):
    async def wait():
        early = await hub.ended("r", 0.05)
        asyncio.get_running_loop().call_later(0.05, hub.publish, "r", END)
        return early, await hub.ended("r", 5), await hub.ended("r", 0)

    assert asyncio.run(wait()) == (False, True, True)


def test_memory_is_bounded(hub, monkeypatch):
    monkeypatch.setattr(progress, "_KEPT_RUNS", 3)
    for run in range(10):
        hub.publish(str(run), END)
    assert list(hub._channels) == ["7", "8", "9"]
    for number in range(2000):
        hub.publish("long", {"kind": "mesh", "mesh": number})
    assert len(hub._channels["long"].events) == 512
    hub.publish("long", END)
    assert len(hub._channels["long"].events) == 32


def test_a_follower_that_leaves_is_forgotten(hub):
    async def leave():
        with pytest.raises(TimeoutError):
            await asyncio.wait_for(collect(hub), 0.05)

    asyncio.run(leave())
    assert not hub._channels["r"].listened


def test_who_waits_for_the_end_is_woken_by_nothing_else(hub):
    async def wait():
        waiting = asyncio.create_task(hub.ended("r", 5))
        await asyncio.sleep(0)
        (bell,) = hub._channels["r"].last_bells
        rung = []
        hub._channels["r"].last_bells = {lambda: (rung.append(1), bell())}
        for number in range(20):
            hub.publish("r", {"kind": "mesh", "mesh": number})
        assert not rung
        hub.publish("r", END)
        return rung, await waiting

    assert asyncio.run(wait()) == ([1], True)
