"""The web process stays small: it imports nothing that only workers need, and little memory is its own."""

import subprocess
import sys
from pathlib import Path

from web import links

HEAVY = ("casadi", "scipy", "sympy", "pint", "plotly", "alembic", "ziamath", "fontTools")
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


def test_the_server_stays_small_while_it_is_used(server, client, line):
    for address in ("/", "/compose?sample=crucible", "/reference", line["links"]["page"], line["links"]["table"]):
        assert client.get(address).status_code == 200
    client.get(links.static("vendor/plotly.min.js"))
    maps = Path(f"/proc/{server.process.pid}/maps").read_text()
    assert not [name for name in ("casadi", "scipy") if f"/{name}/" in maps]
    assert _resident(server.process.pid) <= MOST_MEGABYTES
    for worker in _children(server.process.pid):
        assert _resident(worker) <= MOST_OF_A_WORKER


def _resident(pid):
    rows = Path(f"/proc/{pid}/status").read_text().splitlines()
    return int(next(row for row in rows if row.startswith("VmRSS:")).split()[1]) / 1024


def _children(pid):
    return [int(child) for child in Path(f"/proc/{pid}/task").glob("*/children") for child in child.read_text().split()]
