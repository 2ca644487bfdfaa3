"""Of many signs of life few are passed on, never out of order, and the last one before anything else."""

from service import thinning
from service.thinning import thinned


def iteration(number):
    return {"kind": "iteration", "iteration": number}


def test_a_burst_becomes_its_first_and_its_last():
    passed = []
    tell = thinned(passed.append)
    for number in range(1000):
        tell(iteration(number))
    tell({"kind": "mesh", "mesh": 1})
    assert passed[0] == iteration(0)
    assert passed[-2:] == [iteration(999), {"kind": "mesh", "mesh": 1}]
    assert len(passed) < 20


def test_slow_iterations_all_pass(monkeypatch):
    times = iter(range(100))
    monkeypatch.setattr(thinning.time, "monotonic", lambda: float(next(times)))
    passed = []
    tell = thinned(passed.append)
    events = [iteration(number) for number in range(10)]
    for event in events:
        tell(event)
    assert passed == events


def test_what_was_held_back_is_never_told_after_a_later_one(monkeypatch):
    times = iter([10.0, 10.01, 10.2, 10.21])
    monkeypatch.setattr(thinning.time, "monotonic", lambda: next(times))
    passed = []
    tell = thinned(passed.append)
    for event in (iteration(1), iteration(2), iteration(3), {"kind": "mesh", "mesh": 1}):
        tell(event)
    assert passed == [iteration(1), iteration(3), {"kind": "mesh", "mesh": 1}]
