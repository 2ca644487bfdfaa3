"""kill -9 of the whole server in the middle of its work loses nothing that it had accepted, and leaves no process."""

import json
import subprocess
import sys
from pathlib import Path

from service.run import State
from service.settings import Settings
from service.store import Store

HERE = Path(__file__).parent
LIVES = 3
RUNS = 8


def test_no_accepted_run_is_lost_by_killing_the_server(tmp_path, until):
    data, file = tmp_path / "data", tmp_path / "done"
    accepted = {}
    for life in range(LIVES):
        with subprocess.Popen(
            [sys.executable, HERE / "serving.py", data], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
        ) as server:
            assert server.stdout.readline() == "ready\n"
            for number in range(RUNS):
                say = f"{life}.{number}"
                order = {"do": "append", "file": str(file), "say": say, "seconds": 0.2}
                server.stdin.write(json.dumps(order) + "\n")
                server.stdin.flush()
                accepted[server.stdout.readline().strip()] = say
            before = _lines(file)
            until(lambda before=before: _lines(file) > before)
            children = _children(server.pid)
            server.kill()
        assert len(children) == 2
        until(lambda pids=children: not any(_runs(pid) for pid in pids), 5)

    store = Store(Settings(data=data).database_url)
    try:
        assert len(accepted) == LIVES * RUNS
        assert sum(store.counts().values()) == LIVES * RUNS
        assert store.counts()[State.FINISHED] < LIVES * RUNS, "the kill came too late to show anything"
        with subprocess.Popen(
            [sys.executable, HERE / "serving.py", data], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
        ) as server:
            until(lambda: store.counts()[State.FINISHED] == LIVES * RUNS, 20)
            server.kill()
        assert all(json.loads(store.result(id))["answer"] == say for id, say in accepted.items())
        assert all(store.get(id).deaths == 0 for id in accepted)
        assert set(file.read_text().split()) == set(accepted.values())
    finally:
        store.close()


def _lines(file):
    return len(file.read_text().split()) if file.exists() else 0


def _children(pid):
    return [int(child) for child in Path(f"/proc/{pid}/task").glob("*/children") for child in child.read_text().split()]


def _runs(pid):
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except FileNotFoundError:
        return False
