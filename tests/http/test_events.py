"""Progress as Server-Sent Events: order, end, resume, heartbeat of a stream that is read by a real client."""

import json

import pytest

from tests.http.serving import LINE


def test_a_run_is_followed_to_its_end(client, post):
    run = post(LINE).json()
    events = _events(client, run["links"]["events"])
    kinds = [event["event"] for event in events]
    assert kinds[-1] == "end"
    assert kinds.count("end") == 1
    assert events[-1]["data"] == {"kind": "end", "state": "finished"}
    assert "mesh" in kinds
    for event in events:
        assert event["data"]["kind"] == event["event"]
    mesh = next(event["data"] for event in events if event["event"] == "mesh")
    assert (mesh["breaks"][0], mesh["breaks"][-1]) == (0, 3)


def test_a_reader_who_comes_back_gets_only_what_was_missed(client, post):
    run = post(LINE, prefer="wait=60").json()
    events = _events(client, run["links"]["events"])
    assert len(events) >= 3
    missed = _events(client, run["links"]["events"], last_event_id=events[1]["id"])
    assert missed == events[2:]


@pytest.mark.parametrize("known", ["other.7", "7", "", b"\xe9.7"])
def test_an_unknown_place_starts_from_the_beginning(client, line, known):
    events = _events(client, line["links"]["events"], last_event_id=known)
    assert events == _events(client, line["links"]["events"])


def test_events_of_an_ended_run_end_at_once(client, line):
    assert _events(client, line["links"]["events"])[-1]["data"] == {"kind": "end", "state": "finished"}


def test_the_stream_is_neither_kept_nor_held_back(client, line):
    answer = client.get(line["links"]["events"])
    assert answer.headers["content-type"].startswith("text/event-stream")
    assert answer.headers["cache-control"] == "no-cache"


def test_events_of_an_unknown_run_are_a_plain_404(client):
    answer = client.get("/api/v1/runs/unknown/events", headers={"accept": "text/event-stream, */*"})
    assert answer.status_code == 404
    assert answer.headers["content-type"] == "application/problem+json"


def test_a_caller_who_wants_no_events_is_told_so(client, line):
    answer = client.get(line["links"]["events"], headers={"accept": "application/json"})
    assert answer.status_code == 406


def test_deleting_a_run_ends_its_stream(client, post, slow_document):
    run = post(slow_document).json()
    with client.stream("GET", run["links"]["events"]) as answer:
        lines = answer.iter_lines()
        assert next(lines) == "event: state"
        client.delete(run["links"]["self"])
        assert "event: end" in list(lines)


def _events(client, address, **headers):
    names = {name.replace("_", "-"): value for name, value in headers.items()}
    text = client.get(address, headers=names).text
    return [_event(block) for block in text.split("\n\n") if block and not block.startswith(":")]


def _event(block):
    members = dict(line.split(": ", 1) for line in block.splitlines())
    return {**members, "data": json.loads(members["data"])}
