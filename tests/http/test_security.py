"""Headers of every answer, host names, requests that a browser sends for a foreign page."""

import json

import httpx2
import pytest

from service.security import HEADERS
from tests.http.serving import LINE, serving

POST = {"content-type": "application/json"}
BODY = json.dumps(LINE).encode()


@pytest.mark.parametrize(
    "address", ["/", "/compose", "/api/v1/runs", "/nothing", "/static/css/tokens.css", "/api/v1/runs?limit=0", "/livez"]
)
def test_every_answer_carries_the_security_headers(client, address):
    answer = client.get(address)
    assert HEADERS.items() <= dict(answer.headers).items()
    assert "server" not in answer.headers


def test_no_page_may_run_inline_code_or_load_foreign_files():
    policy = HEADERS["content-security-policy"]
    assert policy.startswith("default-src 'none';")
    assert "unsafe" not in policy
    assert "http" not in policy


@pytest.mark.parametrize("host", ["localhost", "127.0.0.1", "[::1]", "localhost:1", "LOCALHOST:8710"])
def test_names_of_this_machine_are_served(client, host):
    assert client.get("/livez", headers={"host": host}).status_code == 200


@pytest.mark.parametrize(
    "host", ["evil.example", "localhost.evil.example", "10.0.0.1", "evil.example:80", "localhost:"]
)
def test_other_names_are_not(client, host):
    answer = client.get("/livez", headers={"host": host})
    assert answer.status_code == 421
    assert answer.json()["type"] == "/problems/host"


FOREIGN = [
    {"sec-fetch-site": "cross-site"},
    {"sec-fetch-site": "same-site"},
    {"sec-fetch-site": "cross-site", "origin": "http://localhost"},
    {"origin": "http://evil.example"},
    {"origin": "null"},
    {"origin": "http://localhost:1"},
]


@pytest.mark.parametrize("headers", FOREIGN)
@pytest.mark.parametrize(
    ("method", "address"),
    [("POST", "/api/v1/runs"), ("POST", "/api/v1/check"), ("POST", "/compose"), ("DELETE", "/api/v1/runs/any")],
)
def test_a_foreign_page_changes_nothing(client, headers, method, address):
    answer = client.request(method, address, headers={**POST, **headers}, content=BODY)
    assert answer.status_code == 403
    assert answer.json()["type"] == "/problems/foreign-request"


def test_own_pages_and_programs_may(client, server):
    host = server.address.removeprefix("http://")
    for headers in (
        {},
        {"sec-fetch-site": "same-origin"},
        {"sec-fetch-site": "none"},
        {"origin": f"http://{host}"},
    ):
        answer = client.post("/api/v1/check", headers={**POST, **headers}, content=BODY)
        assert answer.status_code == 200, headers


def test_a_foreign_page_may_link_here(client):
    assert client.get("/", headers={"sec-fetch-site": "cross-site"}).status_code == 200


def test_an_open_server_is_reached_by_address_and_by_the_names_set(tmp_path):
    with (
        serving(
            tmp_path / "data", "--host", "0.0.0.0", "--open", "--workers", "1", CURVEWRIGHT_HOSTS="Bench.example, x"
        ) as server,
        httpx2.Client(base_url=server.address) as client,
    ):
        for host, status in {"10.1.2.3:8710": 200, "bench.example": 200, "[fe80::1]": 200, "evil.example": 421}.items():
            assert client.get("/livez", headers={"host": host}).status_code == status, host
