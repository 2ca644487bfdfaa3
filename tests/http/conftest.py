"""A real server with real workers for all tests of this folder, and clients for it."""

import json
import time

import httpx2
import pytest

from tests.http.serving import LINE, serving


@pytest.fixture(scope="session")
def server(tmp_path_factory):
    with serving(tmp_path_factory.mktemp("http") / "data", "--workers", "2") as server:
        yield server


@pytest.fixture(scope="session")
def client(server):
    with httpx2.Client(base_url=server.address, timeout=90) as client:
        yield client


@pytest.fixture(scope="session")
def post(client):
    """Posts a document (a dict or bytes) as a run."""

    def send(document, address="/api/v1/runs", **headers):
        content = document if isinstance(document, bytes) else json.dumps(document).encode()
        names = {name.replace("_", "-"): value for name, value in headers.items()}
        return client.post(address, content=content, headers={"content-type": "application/json", **names})

    return send


@pytest.fixture(scope="session")
def line(post):
    """The finished run of the straight line."""
    answer = post(LINE, prefer="wait=60")
    assert answer.status_code == 201, answer.text
    return answer.json()


@pytest.fixture
def until():
    """Waits for something to become true."""

    def wait(condition, seconds=30):
        end = time.monotonic() + seconds
        while not (found := condition()):
            assert time.monotonic() < end, "it did not come true in time"
            time.sleep(0.05)
        return found

    return wait


@pytest.fixture(scope="session")
def slow_document():
    """A problem that keeps a worker busy for long: switches to be found, to many digits, from many starts."""
    from service import samples

    document = samples.load("crucible")
    document["solve"] = {"tolerance": 1e-11, "time_limit": 300, "points": 200_000, "starts": 100}
    return document
