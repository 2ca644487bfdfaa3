"""kill -9 of the server in the middle of a run, seen through HTTP: nothing that was accepted is lost."""

import json

import httpx2

from tests.http.serving import LINE, serving


def test_accepted_runs_survive_a_killed_server(tmp_path, until, slow_document):
    data = tmp_path / "data"
    with serving(data, "--workers", "1") as server, httpx2.Client(base_url=server.address, timeout=60) as client:
        busy = _post(client, slow_document)
        until(lambda: client.get(f"/api/v1/runs/{busy}").json()["state"] == "solving")
        waiting = [_post(client, {**LINE, "title": f"Line {number}"}) for number in range(3)]
        assert {client.get(f"/api/v1/runs/{id}").json()["state"] for id in waiting} == {"waiting"}
        server.kill()
    with serving(data, "--workers", "1") as server, httpx2.Client(base_url=server.address, timeout=60) as client:
        until(lambda: client.get(f"/api/v1/runs/{busy}").json()["state"] == "solving")
        client.post(f"/api/v1/runs/{busy}/cancel")
        for number, id in enumerate(waiting):
            until(lambda run=id: client.get(f"/api/v1/runs/{run}").json()["state"] == "finished", 60)
            assert client.get(f"/api/v1/runs/{id}/result").json()["problem"]["title"] == f"Line {number}"
        assert client.get(f"/api/v1/runs/{busy}").json()["state"] == "stopped"


def _post(client, document):
    headers = {"content-type": "application/json"}
    return client.post("/api/v1/runs", content=json.dumps(document).encode(), headers=headers).json()["id"]
