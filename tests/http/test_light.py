"""The web process stays small: it imports nothing that only workers need, and little memory is its own."""

import json
import subprocess
import sys
import time
from pathlib import Path

import httpx2

from tests.http.serving import LINE, serving
from web import links

HEAVY = ("casadi", "scipy", "numpy", "pint", "plotly", "alembic", "xlsxwriter", "ziamath", "fontTools")
MOST_MEGABYTES = 150
MOST_OF_A_WORKER = 100


def test_the_application_imports_nothing_heavy():
    code = (
        "import sys; from service.app import create_app; from service.settings import Settings;"
        "create_app(Settings()); import service.serve; print(*sys.modules)"
    )
    loaded = subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True).stdout.split()
    assert "service.app" in loaded
    assert not set(HEAVY) & set(loaded)


def test_server_and_workers_stay_small_while_they_are_used(tmp_path):
    with (
        serving(tmp_path / "data", "--workers", "2") as server,
        httpx2.Client(base_url=server.address, timeout=90) as client,
    ):
        headers = {"content-type": "application/json", "prefer": "wait=60"}
        run = client.post("/api/v1/runs", content=json.dumps(LINE).encode(), headers=headers).json()
        for address in ("/", "/compose?sample=crucible", "/reference", run["links"]["page"], run["links"]["table"]):
            assert client.get(address).status_code == 200
        client.get(links.static("vendor/plotly.min.js"))
        maps = Path(f"/proc/{server.process.pid}/maps").read_text()
        assert not [name for name in ("casadi", "scipy") if f"/{name}/" in maps]
        assert _figure(server.process.pid, "Rss") <= MOST_MEGABYTES
        time.sleep(1)  # a worker gives memory back once it is idle
        for worker in _children(server.process.pid):
            assert _figure(worker, "Pss") <= MOST_OF_A_WORKER


def _figure(pid, name):
    """Megabytes: `Rss` is resident, `Pss` counts what processes share (here the solver's libraries) in equal parts."""
    rows = Path(f"/proc/{pid}/smaps_rollup").read_text().splitlines()
    return int(next(row for row in rows if row.startswith(f"{name}:")).split()[1]) / 1024


def _children(pid):
    return [int(child) for child in Path(f"/proc/{pid}/task").glob("*/children") for child in child.read_text().split()]
