"""HEAD wherever GET works, Allow with every method of the path."""

import pytest

# Address (with the id of a finished run) -> every method that it takes.
ADDRESSES = {
    "/": "GET, HEAD, OPTIONS",
    "/compose": "GET, POST, HEAD, OPTIONS",
    "/runs": "GET, HEAD, OPTIONS",
    "/runs/{id}": "GET, HEAD, OPTIONS",
    "/runs/{id}/stop": "POST, OPTIONS",
    "/reference": "GET, HEAD, OPTIONS",
    "/problems/json": "GET, HEAD, OPTIONS",
    "/livez": "GET, HEAD, OPTIONS",
    "/readyz": "GET, HEAD, OPTIONS",
    "/metrics": "GET, HEAD, OPTIONS",
    "/static/css/tokens.css": "GET, HEAD, OPTIONS",
    "/api/v1/check": "POST, OPTIONS",
    "/api/v1/runs": "GET, POST, HEAD, OPTIONS",
    "/api/v1/runs/{id}": "GET, DELETE, HEAD, OPTIONS",
    "/api/v1/runs/{id}/result": "GET, HEAD, OPTIONS",
    "/api/v1/runs/{id}/problem": "GET, HEAD, OPTIONS",
    "/api/v1/runs/{id}/events": "GET, HEAD, OPTIONS",
    "/api/v1/runs/{id}/table": "GET, HEAD, OPTIONS",
    "/api/v1/runs/{id}/table.csv": "GET, HEAD, OPTIONS",
    "/api/v1/runs/{id}/table.csv-metadata.json": "GET, HEAD, OPTIONS",
    "/api/v1/runs/{id}/prices.csv": "GET, HEAD, OPTIONS",
    "/api/v1/runs/{id}/cancel": "POST, OPTIONS",
    "/api/v1/openapi.json": "GET, HEAD, OPTIONS",
    "/api/v1/schema/problem.json": "GET, HEAD, OPTIONS",
    "/api/v1/schema/result.json": "GET, HEAD, OPTIONS",
}

SOME_RUNS_ONLY = {
    "/api/v1/runs/{id}/sweep.csv": "GET, HEAD, OPTIONS",
    "/api/v1/runs/{id}/observations.csv": "GET, HEAD, OPTIONS",
}
"""What a straight line has not: it is neither swept nor fitted."""

ALL = ADDRESSES | SOME_RUNS_ONLY


@pytest.mark.parametrize("address", ALL)
def test_every_path_lists_all_its_methods(client, line, address):
    path = address.format(id=line["id"])
    refused = client.request("PATCH", path)
    assert refused.status_code == 405
    assert refused.headers["allow"] == ALL[address]
    asked = client.request("OPTIONS", path)
    assert asked.status_code == 204
    assert asked.headers["allow"] == ALL[address]


@pytest.mark.parametrize("address", [address for address, methods in ADDRESSES.items() if "GET" in methods])
def test_head_is_get_without_a_body(client, line, address):
    path = address.format(id=line["id"])
    head, get = client.head(path), client.get(path)
    assert head.status_code == get.status_code == 200
    assert head.content == b""
    assert head.headers["content-type"] == get.headers["content-type"]


@pytest.mark.parametrize("address", SOME_RUNS_ONLY)
def test_head_is_get_also_where_there_is_nothing(client, line, address):
    path = address.format(id=line["id"])
    head, get = client.head(path), client.get(path)
    assert head.status_code == get.status_code in (409, 422)
    assert head.content == b""
    assert get.json()["detail"]


def test_head_of_a_running_stream_ends_at_once(client, post, slow_document):
    run = post(slow_document).json()
    try:
        assert client.head(run["links"]["events"], timeout=10).status_code == 200
    finally:
        client.delete(run["links"]["self"])


def test_the_addresses_above_are_all_that_are_described(client):
    described = set(client.get("/api/v1/openapi.json").json()["paths"])
    known = {address.removesuffix("csv") + "{suffix}" for address in ALL if address.endswith(".csv")} | set(ALL)
    parts = {"/api/v1/runs/{id}/{part}.{suffix}"}  # `sweep` and `prices` among them
    assert described <= known | parts
